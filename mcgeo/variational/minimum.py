"""The metric of lowest energy, with the errors that the block samples give it."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

from mcgeo.errors import GeometryError
from mcgeo.estimate.statistics import Estimate, jackknife_error, jackknife_means
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.variational.energy_surface import Surface

Array = NDArray[np.float64]

# The search covers this distance from the orbit metric; a minimum that runs to its edge is none.
SEARCH_RADIUS = 2.5
_RINGS = 6
_NEWTON_STEPS = 20
_TOLERANCE = 1e-9
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
    """Global search on rings about the orbit metric and the isotropic one, then Newton steps, then jackknife.

    A replica's minimum is one Newton step from the mean's: exact to second order in deviations that are a small part
    of the error. Angles of problems whose axes coincide are fixed by symmetry and come out without error.
    """
    metric, interior = _polished(surface, _coarse_minimum(surface.search))
    expansion = surface.expansion_about(metric)
    gradients = jackknife_means(expansion.gradient)
    hessians = jackknife_means(expansion.hessian)
    steps = np.full(gradients.shape, np.inf)
    if interior:
        steps[:] = -np.linalg.solve(hessians, gradients[..., None])[..., 0]
    stretch, angle = metric_estimates(metric, steps)
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


def _own_stiffness(metric: UnimodularMetric, mean: Array, replicas: Array) -> tuple[Estimate, Estimate]:
    """Second derivatives along (cos 2 theta, sin 2 theta) and perpendicular to it."""
    c, s = math.cos(2 * metric.angle), math.sin(2 * metric.angle)

    def along(u: Array) -> Estimate:
        return Estimate(float(u @ mean @ u), float(jackknife_error(np.einsum("nab,a,b->n", replicas, u, u))))

    return along(np.array([c, s])), along(np.array([-s, c]))


def _mean(samples: Array) -> Estimate:
    return Estimate(
        float(samples.mean()), float(jackknife_error(jackknife_means(samples))), math.nan, float(len(samples))
    )


def _coarse_minimum(surface: Surface) -> UnimodularMetric:
    centre = surface.problem.orbit.metric
    candidates = [centre, ISOTROPIC]
    for ring in range(1, _RINGS + 1):
        radius = SEARCH_RADIUS * ring / _RINGS
        n = 6 * ring
        turns = 2.0 * math.pi * np.arange(n) / n
        candidates += [centre.displaced(radius * math.cos(t), radius * math.sin(t)) for t in turns]
    return min(candidates, key=surface.energy)


def _polished(surface: Surface, start: UnimodularMetric) -> tuple[UnimodularMetric, bool]:
    """Bounded descent in flat coordinates about the orbit metric, then Newton steps to rounding."""
    centre, search = surface.problem.orbit.metric, surface.search
    x, y = start.relative_to(centre).flat_coordinates

    def energy(point: Array) -> float:
        try:
            return search.energy(centre.displaced(point[0], point[1]))
        except GeometryError:
            return math.inf

    found = minimize(energy, (x, y), method="Nelder-Mead", options={"xatol": 1e-3, "fatol": 1e-12})
    metric = centre.displaced(*found.x)
    if metric.distance(centre) > SEARCH_RADIUS:
        edge = metric.relative_to(centre)
        return centre.composed_with(UnimodularMetric(SEARCH_RADIUS, edge.angle)), False
    for _ in range(_NEWTON_STEPS):
        expansion = surface.expansion_about(metric)
        hessian = expansion.hessian.mean(axis=0)
        if np.linalg.eigvalsh(hessian)[0] <= 0.0:
            return metric, False
        step = -np.linalg.solve(hessian, expansion.gradient.mean(axis=0))
        metric = metric.displaced(*step)
        if float(np.hypot(*step)) < _TOLERANCE:
            break
    return on_axis(metric, centre), True


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
    c, s = math.cos(2 * metric.angle), math.sin(2 * metric.angle)
    along = steps @ np.array([c, s])
    # A displacement across moves 2 theta by its length over sinh Q.
    across = steps @ np.array([-s, c]) / (2.0 * math.sinh(metric.stretch))
    angle_error = float(jackknife_error(across))
    return (
        Estimate(metric.stretch, float(jackknife_error(along))),
        # An angle that symmetry fixes has no error but the rounding of differences.
        Estimate(metric.angle, angle_error if angle_error > _ROUNDING else 0.0),
    )
