"""A sampled liquid on the torus, and the quantities that follow from it without more sampling."""

from __future__ import annotations

from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.conjugate import conjugate_occupations, conjugate_structure
from mcgeo.estimate.control_variates import Cleared, cleared, control_z
from mcgeo.estimate.occupations import PairOccupations, fit_occupations
from mcgeo.estimate.statistics import Estimate, mean_estimate
from mcgeo.estimate.sum_rules import pairs_within, sum_rule_z
from mcgeo.estimate.torus_energy import torus_energy
from mcgeo.geometry.frame import TorusFrame
from mcgeo.problem.interaction import Coulomb, Interaction
from mcgeo.problem.landau_level import LOWEST
from mcgeo.problem.problem import Problem
from mcgeo.runs.build import interaction_from, torus_frame, torus_states
from mcgeo.runs.run_summary import state_summary
from mcgeo.runs.sampled import Sampled
from mcgeo.sampling.measurement import BIN_WIDTH, CONTROLS, PAIRS, STRUCTURE, configurations_counted
from mcgeo.states.base import TrialState
from mcgeo.variational.energy_surface import Surface
from mcgeo.variational.variation import Variation, surface_of

Array = NDArray[np.float64]

# Beyond this |q|_g S(q) is one for every count of pairs.
_WHOLE_STRUCTURE = 6.0


class Liquid(Sampled):
    """One result file of a liquid on the torus."""

    @cached_property
    def states(self) -> list[TrialState]:
        """The trial states."""
        return torus_states(self.resolved)

    @property
    def sampled_states(self) -> list[TrialState]:
        """The trial states."""
        return self.states

    @property
    def axes(self) -> dict[str, tuple[NDArray[Any], str]]:
        """Wavevectors in the lab and their norms, and the edges of the bins of pair distances (in the metric)."""
        waves = self.frame.waves(self.q_max)
        n_bins = self.blocks.counts[PAIRS].shape[-1]
        return {
            "wave": (self.norm, "1/l_B"),
            "wavevector": (waves.vectors, "1/l_B"),
            "wave_integers": (waves.integers, "1"),
            "pair_distance": (BIN_WIDTH * (np.arange(n_bins) + 0.5), "l_B"),
        }

    @property
    def scaled_axes(self) -> dict[str, tuple[str, int]]:
        """S(q) along the waves, pair counts along the distance."""
        return {"wave": (f"means/{STRUCTURE}", 2), "pair_distance": (f"counts/{PAIRS}", 2)}

    @property
    def q_max(self) -> float:
        """Bound on |q|_g of the stored waves."""
        return float(self.resolved["sampling"]["q_max"])

    @cached_property
    def frame(self) -> TorusFrame:
        """Cell and metric."""
        return torus_frame(self.resolved)

    @cached_property
    def norm(self) -> Array:
        """|q|_g of the stored waves, shape (n_waves,)."""
        waves = self.frame.waves(self.q_max)
        return np.asarray(np.sqrt(self.frame.metric.wavevector_norm_sq(waves.vectors)))

    @property
    def configurations_per_count(self) -> int:
        """Configurations behind one sample of the pair counts: a block's, also where a walker's blocks are averaged."""
        return configurations_counted(self.schedule.measurements_per_block) * len(self.states)

    @property
    def is_conjugate(self) -> bool:
        """True when the liquid asked for is the hole conjugate of the sampled one."""
        return bool(self.resolved["state"]["conjugate"])

    @property
    def n_electrons(self) -> int:
        """Electrons of the liquid asked for: those of the sampled state, or the empty orbitals beside them."""
        sampled = self.states[0].n_electrons
        return self.frame.lab.n_flux - sampled if self.is_conjugate else sampled

    @cached_property
    def control_variates(self) -> Cleared | None:
        """Block means of S(q) after regression on the controls, if the state has any; see `Cleared`."""
        controls = self.blocks.means.get(CONTROLS)
        if controls is None:
            return None
        return cleared(self.blocks.means[STRUCTURE], controls, control_z(self.independent(controls)))

    @cached_property
    def variance_reduction(self) -> float:
        """Variance of the Coulomb energy's block means without controls over that with them; 1 where none are used."""
        found = self.control_variates
        if found is None:
            return 1.0
        energy = torus_energy(self.frame, self.q_max, Coulomb())
        return float(energy.of(self.blocks.means[STRUCTURE]).var() / energy.of(found.blocks).var())

    @property
    def control_summary(self) -> dict[str, Any]:
        """Whether the controls were used, their means in standard errors, and what the energy's variance gained."""
        found = self.control_variates
        if found is None:
            return {}
        return {
            "controls": found.verdict,
            "control_z": found.z.tolist(),
            "variance_reduction": self.variance_reduction,
        }

    @cached_property
    def _sampled_structure(self) -> Array:
        found = self.control_variates
        return self.independent(self.blocks.means[STRUCTURE] if found is None else found.blocks)

    @property
    def rules(self) -> dict[str, float]:
        """Pairs counted one by one against those that S(q) tells of."""
        if self.q_max < _WHOLE_STRUCTURE:
            return {}
        counts = self.blocks.counts[PAIRS]
        radius, electrons = BIN_WIDTH * counts.shape[-1], self.states[0].n_electrons
        expected = pairs_within(self.frame, self.norm, self.blocks.means[STRUCTURE], electrons, radius)
        difference = counts.sum(axis=-1) / self.configurations_per_count - expected
        return {"pair_count": float(control_z(self.independent(difference[..., None]))[0])}

    @property
    def bulk_rules(self) -> dict[str, float]:
        """Sum rules of the infinite liquid's pair occupations."""
        return sum_rule_z(self.states[0], self.norm, self._sampled_structure)

    @cached_property
    def structure_samples(self) -> Array:
        """Independent samples of S(q) of the liquid asked for, shape (n_samples, n_waves)."""
        if self.is_conjugate:
            return conjugate_structure(self.states[0].filling, self.norm, self._sampled_structure)
        return self._sampled_structure

    @cached_property
    def occupations(self) -> PairOccupations:
        """Pair occupations of the liquid asked for, with their samples."""
        fitted = fit_occupations(self.states[0], self.norm, self._sampled_structure)
        return conjugate_occupations(fitted) if self.is_conjugate else fitted

    def state_summary(self) -> dict[str, Any]:
        """``state`` of the JSON output."""
        return state_summary(self, self.occupations, self.n_electrons)

    def energy_surface(self, problem: Problem, variation: Variation) -> Surface:
        """Energy of every sample over the hole's metric, of the infinite liquid."""
        return surface_of(self.occupations, problem, variation)

    @cached_property
    def energy(self) -> Estimate:
        """Energy per electron of the infinite liquid from the pair occupations, cleared of noise by control variates.

        Orbit and hole have the state's metric, in the lowest level, for the configured interaction.
        """
        interaction = interaction_from(self.resolved["problem"]["interaction"])
        metric = self.frame.metric
        surface = self.energy_surface(Problem(metric, interaction, LOWEST), Variation())
        return mean_estimate(surface.sample_energies(metric))

    def torus_energy(self, interaction: Interaction) -> Estimate:
        """Energy per electron of the sampled state on its cell, straight from S(q)."""
        energy = mean_estimate(torus_energy(self.frame, self.q_max, interaction).of(self.structure_samples))
        return Estimate(
            energy.value,
            energy.error,
            self.autocorrelation_time,
            self.effective_samples,
        )
