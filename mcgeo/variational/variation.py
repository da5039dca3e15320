"""What is allowed to vary: the three kinds of variational problem.

With the kinetic energy (n + 1/2) Tr(g_m^-1 g_L)/2 in units of hbar omega_c per electron and the level-mixing ratio
kappa = (e^2/4 pi eps l_B)/(hbar omega_c), an orbit of metric g_L and a hole of metric g cost

    E(g_L, g) = (2n + 1)/(4 kappa) Tr(g_m^-1 g_L) + E_int(g_L, g).

*projected*: g_L = g_m (strict limit of a strong field), the kinetic constant left out. *rigid*: g_L = g, the product
wavefunction deformed as a whole. *two_metric*: both free; the surface over g is then the least energy over g_L.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.occupations import PairOccupations
from mcgeo.estimate.statistics import Estimate, jackknife_means
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.problem import Problem
from mcgeo.variational.derivatives import LocalExpansion, expansion
from mcgeo.variational.energy_surface import DirectSurface, EnergySurface, Surface
from mcgeo.variational.interaction_energy import InteractionEnergy, interaction_energy
from mcgeo.variational.minimum import Minimum, metric_estimates, on_axis
from mcgeo.variational.ray_table import rough_energies

Array = NDArray[np.float64]

PROJECTED, RIGID, TWO_METRIC = "projected", "rigid", "two_metric"

_NEWTON_STEPS = 12
_TOLERANCE = 1e-7
# A Newton step longer than this is cut: far from the minimum the Hessian promises too much.
_LONGEST_STEP = 0.5


@dataclass(frozen=True)
class Variation:
    """Kind of variation.

    Attributes
    ----------
    kind : str
        ``projected``, ``rigid`` or ``two_metric``.
    level_mixing : float
        kappa; not used by ``projected``.
    """

    kind: str = PROJECTED
    level_mixing: float = 1.0


def kinetic_energy(problem: Problem, orbit_metric: UnimodularMetric, level_mixing: float) -> float:
    """(2n + 1)/(4 kappa) Tr(g_m^-1 g_L) per electron, in e^2/(4 pi eps l_B)."""
    trace = float(np.sum(problem.mass_metric.inverse_matrix * orbit_metric.matrix))
    return (2 * problem.level + 1) * trace / (4.0 * level_mixing)


@dataclass(frozen=True, eq=False)
class RigidSurface(DirectSurface):
    """E(g, g) with the kinetic energy; see `mcgeo.variational.energy_surface.Surface`."""

    occupations: PairOccupations
    problem: Problem
    level_mixing: float

    def sample_energies(self, metric: UnimodularMetric) -> Array:
        """E(g, g) of every block sample, shape (n_samples,)."""
        return self._energies(metric, interaction_energy(self.occupations))

    def energy(self, metric: UnimodularMetric) -> float:
        """Mean E(g, g)."""
        return float(self._energies(metric, interaction_energy(self.occupations).average)[0])

    def _energies(self, metric: UnimodularMetric, interaction: InteractionEnergy) -> Array:
        rigid = self.problem.with_mass(metric)
        constant = interaction.background(rigid) + kinetic_energy(self.problem, metric, self.level_mixing)
        return constant + interaction.energies(rigid, metric)


@dataclass(frozen=True, eq=False)
class TwoMetricSurface:
    """Least E(g_L, g) over the orbit metric; see `mcgeo.variational.energy_surface.Surface`.

    The orbit is the one that is best for the mean; by the envelope theorem the samples' energies are right to first
    order, and derivatives along the hole follow from those of the joint energy: the gradient is the joint one, the
    Hessian H_hh - H_ho H_oo^-1 H_oh. Derivatives by the hole are exact, those by the orbit taken by differences.
    """

    occupations: PairOccupations
    problem: Problem
    level_mixing: float

    @property
    def _interaction(self) -> InteractionEnergy:
        return interaction_energy(self.occupations)

    def joint_samples(self, orbit_metric: UnimodularMetric, metric: UnimodularMetric) -> Array:
        """E(g_L, g) of every block sample, shape (n_samples,)."""
        return self._joint(orbit_metric, metric, self._interaction)

    def _joint(
        self, orbit_metric: UnimodularMetric, metric: UnimodularMetric, interaction: InteractionEnergy
    ) -> Array:
        seen = self.problem.with_mass(orbit_metric)
        return self._constant(orbit_metric) + interaction.energies(seen, metric)

    def _constant(self, orbit_metric: UnimodularMetric) -> float:
        seen = self.problem.with_mass(orbit_metric)
        return self._interaction.background(seen) + kinetic_energy(self.problem, orbit_metric, self.level_mixing)

    def orbit_of(self, metric: UnimodularMetric) -> UnimodularMetric:
        """The best orbit metric for a hole of metric g, by Newton steps from the mass metric."""
        orbit = self.problem.mass_metric
        for _ in range(_NEWTON_STEPS):

            def mean(point: Array, orbit: UnimodularMetric = orbit) -> Array:
                return self._joint(orbit.displaced(*point), metric, self._interaction.average)

            step = expansion(mean, 2).downhill_step(_LONGEST_STEP)
            orbit = orbit.displaced(*step)
            if float(np.hypot(*step)) < _TOLERANCE:
                break
        return orbit

    def sample_energies(self, metric: UnimodularMetric) -> Array:
        """Least E(g_L, g) of every block sample, shape (n_samples,)."""
        return self.joint_samples(self.orbit_of(metric), metric)

    def energy(self, metric: UnimodularMetric) -> float:
        """Mean of the least E(g_L, g)."""
        return float(self._joint(self.orbit_of(metric), metric, self._interaction.average)[0])

    def joint_expansion(self, orbit_metric: UnimodularMetric, metric: UnimodularMetric) -> LocalExpansion:
        """Expansion of every sample in the flat coordinates of the orbit (first two) and of the hole."""
        return self._joint_expansion(orbit_metric, metric, self._interaction)

    def _joint_expansion(
        self, orbit_metric: UnimodularMetric, metric: UnimodularMetric, interaction: InteractionEnergy
    ) -> LocalExpansion:
        def along_hole(orbit: UnimodularMetric) -> LocalExpansion:
            local = interaction.expansion(self.problem.with_mass(orbit), metric)
            return local.above(self._constant(orbit))

        def energy_and_gradient(point: Array) -> Array:
            local = along_hole(orbit_metric.displaced(*point))
            return np.concatenate([local.energy, local.gradient.ravel()])

        hole = along_hole(orbit_metric)
        n = len(hole.energy)
        by_orbit = expansion(energy_and_gradient, 2)
        mixed = by_orbit.gradient[n:].reshape(n, 2, 2)
        hessian = np.block([[by_orbit.hessian[:n], np.swapaxes(mixed, 1, 2)], [mixed, hole.hessian]])
        return LocalExpansion(hole.energy, np.concatenate([by_orbit.gradient[:n], hole.gradient], axis=1), hessian)

    def expansion_about(self, metric: UnimodularMetric) -> LocalExpansion:
        """Gradient and Hessian of every sample along the hole, the orbit following."""
        return self._following(metric, self._interaction)

    def mean_expansion(self, metric: UnimodularMetric) -> LocalExpansion:
        """That of the mean."""
        return self._following(metric, self._interaction.average)

    def _following(self, metric: UnimodularMetric, interaction: InteractionEnergy) -> LocalExpansion:
        joint = self._joint_expansion(self.orbit_of(metric), metric, interaction)
        oo, oh, hh = joint.hessian[:, :2, :2], joint.hessian[:, :2, 2:], joint.hessian[:, 2:, 2:]
        # The samples' own orbits are a small step off the mean's; the gradient follows them.
        shift = np.linalg.solve(oo, np.concatenate([oh, joint.gradient[:, :2, None]], axis=-1))
        transposed = np.swapaxes(oh, 1, 2)
        gradient = joint.gradient[:, 2:] - (transposed @ shift[..., 2:])[..., 0]
        return LocalExpansion(joint.energy, gradient, hh - transposed @ shift[..., :2])

    def rough_energies(self, points: Array) -> Array:
        """Those of the projected problem: the minimum at two free metrics is looked for from its minimum."""
        return rough_energies(self.occupations, self.problem, points)


def surface_of(occupations: PairOccupations, problem: Problem, variation: Variation) -> Surface:
    """The energy surface of a kind of variation."""
    if variation.kind == RIGID:
        return RigidSurface(occupations, problem, variation.level_mixing)
    if variation.kind == TWO_METRIC:
        return TwoMetricSurface(occupations, problem, variation.level_mixing)
    return EnergySurface(occupations, problem)


def orbit_estimates(surface: Surface, minimum: Minimum) -> tuple[Estimate, Estimate]:
    """Stretch and angle (radians) of the orbit metric that goes with a minimum, with errors.

    It is that of mass and field where the orbit does not vary, and the hole's where both are one. Where both vary
    apart, a replica's pair of metrics is one Newton step of the joint energy away.
    """
    if isinstance(surface, RigidSurface):
        return minimum.stretch, minimum.angle
    if not isinstance(surface, TwoMetricSurface):
        fixed = surface.problem.orbit.metric
        return Estimate(fixed.stretch, 0.0), Estimate(fixed.angle, 0.0)
    orbit = surface.orbit_of(minimum.metric)
    local = surface.joint_expansion(orbit, minimum.metric)
    gradients, hessians = jackknife_means(local.gradient), jackknife_means(local.hessian)
    steps = np.asarray(-np.linalg.solve(hessians, gradients[..., None])[:, :2, 0])
    return metric_estimates(on_axis(orbit, surface.problem.mass_metric), steps)
