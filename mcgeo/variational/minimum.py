"""The metric of lowest energy, with the errors that the block samples give it."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.estimate.statistics import Estimate, jackknife_error, jackknife_means
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.problem import Problem
from mcgeo.variational.derivatives import FLAT, NO_CURVATURE, LocalExpansion
from mcgeo.variational.energy_surface import Surface
from mcgeo.variational.quadrature import LARGEST_DISTANCE

Array = NDArray[np.float64]

# The search covers this distance from the orbit metric, and goes past the interaction's metrics where these are
# farther; a minimum that runs to its edge is none.
SEARCH_RADIUS = 2.5
_PAST_INTERACTION = 0.5
_LARGEST_RADIUS = 3.75
_BETWEEN_RINGS = 0.42
_NEWTON_STEPS = 60
# A Newton step longer than this is cut: far from the minimum the Hessian promises too much.
_LONGEST_STEP = 0.5
# After a step as short as this the next would be its square.
_SHORT_STEP = 3e-6
_TOLERANCE = 1e-9
_ROUNDING_OF_ENERGY = 1e-14
_ROUNDING = 1e-7


@dataclass(frozen=True, eq=False)
class Minimum:
    """Where the energy is least.

    Attributes
    ----------
    metric : UnimodularMetric
    interior : bool
        False when the energy still falls at the edge of the range searched; the metric is then that edge point.
    stretch, angle : Estimate
        Q and theta (radians); the angle's error is infinite where Q = 0.
    energy : Estimate
    stiffness : ndarray, shape (2, 2)
        Hessian in the flat coordinates about the minimum: the directions (Q cos 2 theta, Q sin 2 theta) of the lab.
    stiffness_error : ndarray, shape (2, 2)
    stiffness_along, stiffness_across : Estimate
        The same along the optimum's own stretch and across it (a turn of the hole).
    gain_isotropic, gain_mass : Estimate
        Energy of the isotropic hole, and of a hole that follows the orbit (the mass), above the minimum's.
    """

    metric: UnimodularMetric
    interior: bool
    stretch: Estimate
    angle: Estimate
    energy: Estimate
    stiffness: Array
    stiffness_error: Array
    stiffness_along: Estimate
    stiffness_across: Estimate
    gain_isotropic: Estimate
    gain_mass: Estimate

    @property
    def aspect_ratio(self) -> Estimate:
        """e^Q, long axis over short axis of the hole."""
        value = math.exp(self.stretch.value)
        return Estimate(value, value * self.stretch.error)

    @property
    def least_stiffness(self) -> float:
        """Lower eigenvalue of the stiffness."""
        return float(np.linalg.eigvalsh(self.stiffness)[0])


def find_minimum(surface: Surface) -> Minimum:
    """Global search on rings about the orbit metric, then Newton steps, then jackknife.

    A replica's minimum is one Newton step from the mean's: exact to second order in deviations that are a small part
    of the error. Angles of problems whose axes coincide are fixed by symmetry and come out without error.
    """
    radius = search_radius(surface.problem)
    points = _rings(radius)
    metric, interior = _polished(surface, points[np.argmin(surface.rough_energies(points))], radius)
    expansion = surface.expansion_about(metric)
    gradients = jackknife_means(expansion.gradient)
    hessians = jackknife_means(expansion.hessian)
    stretch, angle = _estimates(metric, interior, gradients, hessians)
    at_isotropic = surface.sample_energies(ISOTROPIC) - expansion.energy
    at_mass = surface.sample_energies(surface.problem.orbit.metric) - expansion.energy
    along, across = _own_stiffness(metric, expansion.hessian.mean(axis=0), hessians)
    return Minimum(
        metric,
        interior,
        stretch,
        angle,
        _mean(expansion.energy),
        expansion.hessian.mean(axis=0),
        jackknife_error(hessians),
        along,
        across,
        _mean(at_isotropic),
        _mean(at_mass),
    )


def _estimates(
    metric: UnimodularMetric, interior: bool, gradients: Array, hessians: Array
) -> tuple[Estimate, Estimate]:
    """Stretch and angle from the replicas' derivatives at the mean's minimum."""
    if not interior:
        return metric_estimates(metric, np.full(gradients.shape, np.inf))
    least, largest = np.linalg.eigvalsh(hessians.mean(axis=0))
    if least > FLAT * largest:
        return metric_estimates(metric, np.asarray(-np.linalg.solve(hessians, gradients[..., None])[..., 0]))
    # A turn of the hole costs nothing: replicas move along the stretch, and the angle is any.
    along, _ = _own_directions(metric)
    lengths = -(gradients @ along) / np.einsum("nab,a,b->n", hessians, along, along)
    stretch, angle = metric_estimates(metric, lengths[:, None] * along)
    return stretch, Estimate(angle.value, math.inf)


def _own_directions(metric: UnimodularMetric) -> tuple[Array, Array]:
    """Unit vectors along the metric's own stretch and across it."""
    c, s = math.cos(2 * metric.angle), math.sin(2 * metric.angle)
    return np.array([c, s]), np.array([-s, c])


def _own_stiffness(metric: UnimodularMetric, mean: Array, replicas: Array) -> tuple[Estimate, Estimate]:
    """Second derivatives along (cos 2 theta, sin 2 theta) and perpendicular to it."""

    def second(u: Array) -> Estimate:
        return Estimate(float(u @ mean @ u), float(jackknife_error(np.einsum("nab,a,b->n", replicas, u, u))))

    along, across = _own_directions(metric)
    return second(along), second(across)


def _mean(samples: Array) -> Estimate:
    return Estimate(
        float(samples.mean()), float(jackknife_error(jackknife_means(samples))), math.nan, float(len(samples))
    )


def search_radius(problem: Problem) -> float:
    """Distance from the orbit metric within which a minimum is looked for.

    Raises
    ------
    GeometryError
        If interaction and orbit are farther apart than the quadrature resolves: the hole may lie anywhere between.
    """
    farthest = max(metric.distance(problem.orbit.metric) for metric in problem.interaction.metrics)
    if farthest > LARGEST_DISTANCE:
        raise GeometryError(
            f"interaction and orbit metric are {farthest:.3g} apart (relative aspect ratio {math.exp(farthest):.3g}); "
            f"at most {LARGEST_DISTANCE:g} works"
        )
    return min(max(SEARCH_RADIUS, farthest + _PAST_INTERACTION), _LARGEST_RADIUS)


@lru_cache(maxsize=64)
def _rings(largest: float) -> Array:
    """Flat coordinates of the centre and of points on rings about it, shape (n, 2)."""
    n_rings = math.ceil(largest / _BETWEEN_RINGS)
    points = [(0.0, 0.0)]
    for ring in range(1, n_rings + 1):
        radius, n = largest * ring / n_rings, 6 * ring
        turns = 2.0 * math.pi * np.arange(n) / n
        points += [(radius * math.cos(t), radius * math.sin(t)) for t in turns]
    return np.array(points)


def _polished(surface: Surface, start: Array, radius: float) -> tuple[UnimodularMetric, bool]:
    """Newton's descent on the mean from flat coordinates about the orbit metric, to rounding."""
    centre = surface.problem.orbit.metric
    metric = centre.displaced(*start)
    at, on_edge = surface.mean_expansion(metric), False
    for _ in range(_NEWTON_STEPS):
        step = at.downhill_step(_LONGEST_STEP)
        metric, at, beyond = _downhill(surface, metric, at, step, radius)
        if beyond and on_edge:
            return metric, False
        on_edge = beyond
        if float(np.hypot(*step)) < _SHORT_STEP:
            break
    # Curvatures of a circle of equal holes are rounding, of either sign, along it.
    least, largest = np.linalg.eigvalsh(at.hessian[0])
    if largest < NO_CURVATURE or least < -FLAT * largest:
        return metric, False
    return on_axis(metric, centre), True


def _downhill(
    surface: Surface, metric: UnimodularMetric, at: LocalExpansion, step: Array, radius: float
) -> tuple[UnimodularMetric, LocalExpansion, bool]:
    """A step, halved until the energy falls, and stopped at the edge of the search; True where it led beyond."""
    centre = surface.problem.orbit.metric
    while True:
        moved = metric.displaced(*step)
        relative = moved.relative_to(centre)
        beyond = relative.stretch > radius
        if beyond:
            moved = centre.composed_with(UnimodularMetric(radius, relative.angle))
        there = surface.mean_expansion(moved)
        if there.energy[0] <= at.energy[0] + _ROUNDING_OF_ENERGY or float(np.hypot(*step)) < _SHORT_STEP:
            return moved, there, beyond
        step = 0.5 * step


def on_axis(metric: UnimodularMetric, orbit_metric: UnimodularMetric) -> UnimodularMetric:
    """Without what rounding has added to a circle, or to an axis that is the orbit's by symmetry."""
    if metric.stretch < 10.0 * _TOLERANCE:
        return ISOTROPIC
    off = math.sinh(metric.stretch) * math.sin(2.0 * (metric.angle - orbit_metric.angle))
    if orbit_metric.stretch == 0.0 or abs(off) > 10.0 * _TOLERANCE:
        return metric
    along = math.cos(2.0 * (metric.angle - orbit_metric.angle)) > 0.0
    return UnimodularMetric(metric.stretch if along else -metric.stretch, orbit_metric.angle)


def metric_estimates(metric: UnimodularMetric, steps: Array) -> tuple[Estimate, Estimate]:
    """Q and theta (radians) with errors from the replicas' displacements in flat coordinates, shape (n_replicas, 2)."""
    if not np.all(np.isfinite(steps)):
        return Estimate(metric.stretch, math.inf), Estimate(metric.angle, math.inf)
    if metric.stretch == 0.0:
        return Estimate(0.0, float(np.hypot(*jackknife_error(steps)))), Estimate(0.0, math.inf)
    along, across = _own_directions(metric)
    # A displacement across moves 2 theta by its length over sinh Q.
    angle_error = float(jackknife_error(steps @ across / (2.0 * math.sinh(metric.stretch))))
    return (
        Estimate(metric.stretch, float(jackknife_error(steps @ along))),
        # An angle that symmetry fixes has no error but the rounding of differences.
        Estimate(metric.angle, angle_error if angle_error > _ROUNDING else 0.0),
    )
