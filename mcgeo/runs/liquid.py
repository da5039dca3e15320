"""A sampled liquid: what one result file holds, and the quantities that follow from it without more sampling."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.conjugate import conjugate_occupations, conjugate_structure
from mcgeo.estimate.diagnostics import Diagnostics, diagnose
from mcgeo.estimate.occupations import PairOccupations, fit_occupations
from mcgeo.estimate.statistics import Estimate, independent_samples, integrated_autocorrelation_time, mean_estimate
from mcgeo.estimate.torus_energy import torus_energy
from mcgeo.problem.interaction import Interaction
from mcgeo.runs.build import schedule_from, torus_frame, torus_states
from mcgeo.sampling.chain import ChainState
from mcgeo.sampling.measurement import configurations_counted

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Blocks:
    """Block means of a run; a liquid that is an average over sectors has one component per sector.

    Attributes
    ----------
    structure : ndarray, shape (n_blocks, n_walkers, n_waves)
        S(q), averaged over components walker by walker: walkers stay independent.
    pair_counts : ndarray of int64, shape (n_blocks, n_walkers, n_bins)
        Summed over components.
    trace : ndarray, shape (n_components, n_blocks, n_walkers, n_measurements)
        Torus energy (Coulomb) per electron of single configurations.
    accepted : ndarray, shape (n_components, n_blocks, n_walkers)
    drift : ndarray, shape (n_components, n_blocks)
    """

    structure: Array
    pair_counts: NDArray[np.int64]
    trace: Array
    accepted: Array
    drift: Array


@dataclass(frozen=True, eq=False)
class Liquid:
    """One result file.

    Attributes
    ----------
    resolved : mapping
        The configuration with every default filled in.
    blocks : Blocks
    chains : list of ChainState
        Where each component's chain stands.
    seconds : float
        Wall time of production.
    complete : bool
        False when the run was interrupted before its last block.
    """

    resolved: Mapping[str, Any]
    blocks: Blocks
    chains: list[ChainState]
    seconds: float
    complete: bool

    @cached_property
    def states(self) -> list[Any]:
        """The trial states."""
        return torus_states(self.resolved)

    @property
    def q_max(self) -> float:
        """Bound on |q|_g of the stored waves."""
        return float(self.resolved["sampling"]["q_max"])

    @cached_property
    def frame(self) -> Any:
        """Cell and metric."""
        return torus_frame(self.resolved)

    @cached_property
    def norm(self) -> Array:
        """|q|_g of the stored waves, shape (n_waves,)."""
        waves = self.frame.waves(self.q_max)
        return np.asarray(np.sqrt(self.frame.metric.wavevector_norm_sq(waves.vectors)))

    @cached_property
    def schedule(self) -> Any:
        """How the chains ran."""
        return schedule_from(self.resolved, self.states[0])

    @cached_property
    def time_in_measurements(self) -> float:
        """Integrated autocorrelation time of the energy in measurements; the slowest component's."""
        n_components, _, n_walkers, _ = self.blocks.trace.shape
        series = np.moveaxis(self.blocks.trace, 2, 1).reshape(n_components, n_walkers, -1)
        return float(np.nanmax([integrated_autocorrelation_time(x) for x in series] + [0.0])) or 1.0

    def independent(self, blocks: NDArray[Any]) -> Array:
        """Independent samples of block means of shape (n_blocks, n_walkers, ...)."""
        return independent_samples(blocks, self.schedule.measurements_per_block / self.time_in_measurements)

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
        sampled: int = self.states[0].n_electrons
        return self.frame.lab.n_flux - sampled if self.is_conjugate else sampled

    @cached_property
    def _sampled_structure(self) -> Array:
        return self.independent(self.blocks.structure)

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

    @cached_property
    def diagnostics(self) -> Diagnostics:
        """Whether the run may be trusted."""
        return diagnose(
            self.blocks.trace, self.blocks.accepted, self.time_in_measurements, self.schedule.sweeps_between
        )

    def torus_energy(self, interaction: Interaction) -> Estimate:
        """Energy per electron of the sampled state on its cell, straight from S(q)."""
        energy = mean_estimate(torus_energy(self.frame, self.q_max, interaction).of(self.structure_samples))
        return Estimate(
            energy.value,
            energy.error,
            self.time_in_measurements * self.schedule.sweeps_between,
            self.diagnostics.effective_samples,
        )
