"""The correlation hole of the optimum as one sees it in the plane."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.hole_shape import ContourEllipse, fitted_ellipse
from mcgeo.estimate.occupations import PairOccupations
from mcgeo.estimate.pair_correlation import bulk_pair_correlation_maps
from mcgeo.estimate.statistics import Estimate, jackknife_error, jackknife_means
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.problem import Problem
from mcgeo.variational.minimum import Minimum

Array = NDArray[np.float64]

_GRID_POINTS = 161
_REPLICA_GRID_POINTS = 41
# The map reaches this many mean distances of electrons: the hole and the first ring around it.
_DISTANCES = 1.5


@dataclass(frozen=True, eq=False)
class HoleImage:
    """g(x, y) of the infinite liquid at its optimal metric.

    Attributes
    ----------
    x, y : ndarray, shapes (n,) and (n,)
        In l_B.
    g : ndarray, shape (n, n)
    level : float
        Height of the contour: 1/2, or halfway between g(0) and 1 where bosons leave g(0) above 0.
    ellipse : ContourEllipse or None
        Fitted to the contour; None where it is open.
    stretch, angle : Estimate
        Of the ellipse, angle in radians; NaN where there is none.
    """

    x: Array
    y: Array
    g: Array
    level: float
    ellipse: ContourEllipse | None
    stretch: Estimate
    angle: Estimate


def hole_image(occupations: PairOccupations, problem: Problem, minimum: Minimum) -> HoleImage:
    """Map, contour and fitted ellipse, with errors from the block samples and from the optimum's own error."""
    reach = _DISTANCES * np.sqrt(2.0 * np.pi / float(occupations.filling)) * problem.orbit.metric.aspect_ratio**0.25
    x = np.linspace(-reach, reach, _GRID_POINTS)
    metric = minimum.metric
    mean = occupations.coefficients[None, :]
    g = bulk_pair_correlation_maps(occupations, mean, metric, problem.orbit, x, x)[0]
    level = 0.5 * (1.0 + float(g[_GRID_POINTS // 2, _GRID_POINTS // 2]))
    ellipse = fitted_ellipse(x, x, g, level)
    stretch, angle = _errors(occupations, problem, minimum, reach, level, ellipse)
    return HoleImage(x, x, g, level, ellipse, stretch, angle)


def _errors(
    occupations: PairOccupations,
    problem: Problem,
    minimum: Minimum,
    reach: float,
    level: float,
    ellipse: ContourEllipse | None,
) -> tuple[Estimate, Estimate]:
    if ellipse is None:
        return Estimate(np.nan, np.nan), Estimate(np.nan, np.nan)
    grid = np.linspace(-reach, reach, _REPLICA_GRID_POINTS)

    def shapes(coefficients: Array, metric: UnimodularMetric) -> Array:
        """Flat coordinates about the ellipse's own metric, shape (n, 2)."""
        maps = bulk_pair_correlation_maps(occupations, coefficients, metric, problem.orbit, grid, grid)
        fits = [fitted_ellipse(grid, grid, g, level) for g in maps]
        return np.array(
            [fit.metric.relative_to(ellipse.metric).flat_coordinates if fit else (np.nan, np.nan) for fit in fits]
        )

    statistical = jackknife_error(shapes(jackknife_means(occupations.samples), minimum.metric))
    q, error = minimum.metric.stretch, minimum.stretch.error
    if np.isfinite(error):
        moved = UnimodularMetric(q + error, minimum.metric.angle)
        both = shapes(occupations.coefficients[None, :], moved) - shapes(
            occupations.coefficients[None, :], minimum.metric
        )
        statistical = np.hypot(statistical, both[0])
    metric = ellipse.metric
    c, s = np.cos(2.0 * metric.angle), np.sin(2.0 * metric.angle)
    along = float(np.hypot(c * statistical[0], s * statistical[1]))
    across = float(np.hypot(s * statistical[0], c * statistical[1]))
    angle_error = across / (2.0 * np.sinh(metric.stretch)) if metric.stretch > 0.0 else np.inf
    return Estimate(metric.stretch, along), Estimate(metric.angle, angle_error)
