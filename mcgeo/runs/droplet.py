"""A sampled droplet, and the quantities that follow from it without more sampling."""

from __future__ import annotations

from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.control_variates import control_z
from mcgeo.estimate.droplet import DropletEnergies, RadialDensity, droplet_energies, radial_density
from mcgeo.estimate.droplet_occupations import DropletOccupations, fit_droplet_occupations
from mcgeo.estimate.statistics import Estimate, mean_estimate
from mcgeo.problem.problem import Problem
from mcgeo.runs.build import droplet_state
from mcgeo.runs.droplet_scan import require_droplet_problem
from mcgeo.runs.run_summary import state_summary
from mcgeo.runs.sampled import Sampled
from mcgeo.sampling.droplet_measurement import (
    ELECTRON_BACKGROUND,
    ELECTRON_ELECTRON,
    ELECTRON_ELECTRON_LAB,
    PAIR_BIN_WIDTH,
    PAIRS,
    RADIAL,
    RADIAL_BIN_WIDTH,
    SECOND_MOMENTS,
    configurations_counted,
)
from mcgeo.states.droplet import DropletState, mean_square_radius
from mcgeo.variational.droplet_surface import DropletInteraction, DropletSurface
from mcgeo.variational.variation import Variation

Array = NDArray[np.float64]


class Droplet(Sampled):
    """One result file of a droplet."""

    @cached_property
    def state(self) -> DropletState:
        """The trial state."""
        return droplet_state(self.resolved)

    @property
    def sampled_states(self) -> list[DropletState]:
        """The trial state."""
        return [self.state]

    @property
    def axes(self) -> dict[str, tuple[NDArray[Any], str]]:
        """Middle of the bins of r' and of |r'_ij|, in isotropic coordinates."""
        n_bins, n_pair_bins = (self.blocks.counts[name].shape[-1] for name in (RADIAL, PAIRS))
        return {
            "radius": (RADIAL_BIN_WIDTH * (np.arange(n_bins) + 0.5), "l_B"),
            "pair_distance": (PAIR_BIN_WIDTH * (np.arange(n_pair_bins) + 0.5), "l_B"),
        }

    @property
    def scaled_axes(self) -> dict[str, tuple[str, int]]:
        """Radial counts along the radius, pair counts along the distance."""
        return {"radius": (f"counts/{RADIAL}", 2), "pair_distance": (f"counts/{PAIRS}", 2)}

    def samples(self, name: str) -> Array:
        """Independent samples of a measured mean."""
        return self.independent(self.blocks.means[name])

    @property
    def energies(self) -> DropletEnergies:
        """Coulomb energies per electron with the neutralising ellipse."""
        return droplet_energies(
            self.state,
            self.samples(ELECTRON_ELECTRON),
            self.samples(ELECTRON_ELECTRON_LAB),
            self.samples(ELECTRON_BACKGROUND),
        )

    @property
    def energy(self) -> Estimate:
        """Coulomb energy per electron with the neutralising ellipse."""
        return self.energies.total

    @property
    def second_moments(self) -> list[Estimate]:
        """<x^2>, <y^2>, <xy> per electron in the lab, l_B^2."""
        return [mean_estimate(column) for column in self.samples(SECOND_MOMENTS).T]

    @property
    def rules(self) -> dict[str, float]:
        """<r'^2>, known from the angular momentum."""
        moments = self.samples(SECOND_MOMENTS)
        (xx, xy), (_, yy) = self.state.metric.matrix
        radius_sq = moments @ np.array([xx, yy, 2.0 * xy]) - mean_square_radius(self.state)
        return {"mean_square_radius": float(control_z(radius_sq[:, None])[0])}

    @property
    def density(self) -> RadialDensity:
        """Mean density on rings of the isotropic coordinates."""
        counts = self.independent(self.blocks.counts[RADIAL])
        return radial_density(counts, self.schedule.measurements_per_block, RADIAL_BIN_WIDTH)

    @cached_property
    def occupations(self) -> DropletOccupations:
        """Occupations of orbitals and of relative angular momenta, with their samples."""
        n = self.state.n_electrons
        measured = self.schedule.measurements_per_block
        n_pairs = configurations_counted(measured) * n * (n - 1) / 2.0
        radial = self.independent(self.blocks.counts[RADIAL]) / measured
        pairs = self.independent(self.blocks.counts[PAIRS]) / n_pairs
        return fit_droplet_occupations(self.state, radial, pairs, (RADIAL_BIN_WIDTH, PAIR_BIN_WIDTH))

    @cached_property
    def interaction(self) -> DropletInteraction:
        """Energies for any orbit, interaction and metric."""
        return DropletInteraction(self.occupations)

    def state_summary(self) -> dict[str, Any]:
        """``state`` of the JSON output."""
        return state_summary(self, self.state, self.state.n_electrons)

    def energy_surface(self, problem: Problem, variation: Variation) -> DropletSurface:
        """Energy of every sample over the droplet's metric, its background included.

        Raises
        ------
        ConfigError
            As `require_droplet_problem`.
        """
        require_droplet_problem(problem, variation)
        return DropletSurface(self.interaction, problem)
