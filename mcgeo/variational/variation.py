"""What is allowed to vary: the three kinds of variational problem.

With the kinetic energy (n + 1/2) Tr(g_m^-1 g_L)/2 in units of hbar omega_c per electron and the level-mixing ratio
kappa = (e^2/4 pi eps l_B)/(hbar omega_c), an orbit of metric g_L and a hole of metric g cost

    E(g_L, g) = (2n + 1)/(4 kappa) Tr(g_m^-1 g_L) + E_int(g_L, g).

*projected*: g_L = g_m (strict limit of a strong field), the kinetic constant left out. *rigid*: g_L = g, the product
wavefunction deformed as a whole. *two_metric*: both free; the surface over g is then the least energy over g_L.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.occupations import PairOccupations
from mcgeo.estimate.statistics import Estimate, jackknife_means
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.problem import Problem
from mcgeo.variational.derivatives import LocalExpansion
from mcgeo.variational.energy_surface import EnergySurface, Surface
from mcgeo.variational.interaction_energy import InteractionEnergy, interaction_energy
from mcgeo.variational.minimum import Minimum, metric_estimates, on_axis
from mcgeo.variational.ray_table import rough_energies

Array = NDArray[np.float64]

PROJECTED, RIGID, TWO_METRIC = "projected", "rigid", "two_metric"

_NEWTON_STEPS = 12
_TOLERANCE = 1e-6
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
class JointEnergy:
    """E(g_L, g) of one liquid, kinetic energy included.

    Parameters
    ----------
    interaction : InteractionEnergy
        Of the samples, or of their average.
    problem : Problem
        Its mass is that of the kinetic energy.
    level_mixing : float
    """

    interaction: InteractionEnergy
    problem: Problem
    level_mixing: float

    def energies(self, orbit_metric: UnimodularMetric, metric: UnimodularMetric) -> Array:
        """E(g_L, g) of every sample, shape (n_samples,)."""
        seen = self.problem.with_mass(orbit_metric)
        constant = self.interaction.background(seen) + kinetic_energy(self.problem, orbit_metric, self.level_mixing)
        return constant + self.interaction.energies(seen, metric)

    def expansion(self, orbit_metric: UnimodularMetric, metric: UnimodularMetric) -> LocalExpansion:
        """Expansion of every sample in the flat coordinates of the orbit (first two) and of the hole."""
        seen = self.problem.with_mass(orbit_metric)
        found = self.interaction.joint_expansion(seen, metric)
        background, kinetic = self.interaction.background_expansion(seen), self._kinetic_expansion(orbit_metric)
        gradient, hessian = found.gradient.copy(), found.hessian.copy()
        gradient[:, :2] += background.gradient + kinetic.gradient
        hessian[:, :2, :2] += background.hessian + kinetic.hessian
        return LocalExpansion(found.energy + background.energy + kinetic.energy, gradient, hessian)

    def _kinetic_expansion(self, orbit_metric: UnimodularMetric) -> LocalExpansion:
        """Tr(g_m^-1 g_L^(1/2) exp(x sigma_z + y sigma_x) g_L^(1/2)) to second order, as one sample."""
        root = orbit_metric.linear_map
        seen = root @ self.problem.mass_metric.inverse_matrix @ root
        unit = (2 * self.problem.level + 1) / (4.0 * self.level_mixing)
        trace = unit * np.trace(seen)
        gradient = unit * np.array([[seen[0, 0] - seen[1, 1], 2.0 * seen[0, 1]]])
        return LocalExpansion(np.array([trace]), gradient, trace * np.eye(2)[None])


@dataclass(frozen=True, eq=False)
class _VariedOrbit(ABC):
    """A surface whose orbit varies with the hole: what its two kinds share."""

    occupations: PairOccupations
    problem: Problem
    level_mixing: float

    @cached_property
    def joint(self) -> JointEnergy:
        """E(g_L, g) of the samples."""
        return JointEnergy(interaction_energy(self.occupations), self.problem, self.level_mixing)

    @cached_property
    def joint_mean(self) -> JointEnergy:
        """That of their mean."""
        return JointEnergy(interaction_energy(self.occupations).average, self.problem, self.level_mixing)

    @abstractmethod
    def orbit_of(self, metric: UnimodularMetric) -> UnimodularMetric:
        """The orbit metric that goes with a hole of metric g."""

    @abstractmethod
    def _following(self, joint: LocalExpansion) -> LocalExpansion:
        """Expansion along the hole from the joint one, the orbit following."""

    def sample_energies(self, metric: UnimodularMetric) -> Array:
        """E(g) of every block sample, shape (n_samples,)."""
        return self.joint.energies(self.orbit_of(metric), metric)

    def energy(self, metric: UnimodularMetric) -> float:
        """Mean E(g)."""
        return float(self.joint_mean.energies(self.orbit_of(metric), metric)[0])

    def expansion_about(self, metric: UnimodularMetric) -> LocalExpansion:
        """Gradient and Hessian of every sample along the hole."""
        return self._following(self.joint.expansion(self.orbit_of(metric), metric))

    def mean_expansion(self, metric: UnimodularMetric) -> LocalExpansion:
        """That of the mean."""
        return self._following(self.joint_mean.expansion(self.orbit_of(metric), metric))


class RigidSurface(_VariedOrbit):
    """E(g, g) with the kinetic energy; see `mcgeo.variational.energy_surface.Surface`."""

    def orbit_of(self, metric: UnimodularMetric) -> UnimodularMetric:
        """The hole's own."""
        return metric

    def _following(self, joint: LocalExpansion) -> LocalExpansion:
        both = np.concatenate([np.eye(2), np.eye(2)])
        return LocalExpansion(joint.energy, joint.gradient @ both, both.T @ joint.hessian @ both)

    def rough_energies(self, points: Array) -> Array:
        """Energies one by one."""
        centre = self.problem.orbit.metric
        return np.array([self.energy(centre.displaced(*point)) for point in points])


class TwoMetricSurface(_VariedOrbit):
    """Least E(g_L, g) over the orbit metric; see `mcgeo.variational.energy_surface.Surface`.

    The orbit is the one that is best for the mean; by the envelope theorem the samples' energies are right to first
    order, and derivatives along the hole follow from those of the joint energy: the gradient is the joint one, the
    Hessian H_hh - H_ho H_oo^-1 H_oh.
    """

    def orbit_of(self, metric: UnimodularMetric) -> UnimodularMetric:
        """The best orbit metric for a hole of metric g, by Newton steps from the mass metric."""
        orbit = self.problem.mass_metric
        for _ in range(_NEWTON_STEPS):
            joint = self.joint_mean.expansion(orbit, metric)
            local = LocalExpansion(joint.energy, joint.gradient[:, :2], joint.hessian[:, :2, :2])
            step = local.downhill_step(_LONGEST_STEP)
            orbit = orbit.displaced(*step)
            if float(np.hypot(*step)) < _TOLERANCE:
                break
        return orbit

    def _following(self, joint: LocalExpansion) -> LocalExpansion:
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
    local = surface.joint.expansion(orbit, minimum.metric)
    gradients, hessians = jackknife_means(local.gradient), jackknife_means(local.hessian)
    steps = np.asarray(-np.linalg.solve(hessians, gradients[..., None])[:, :2, 0])
    return metric_estimates(on_axis(orbit, surface.problem.mass_metric), steps)
