"""The shape one sees: an ellipse fitted to the contour of the correlation hole."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

from mcgeo.geometry.metric import UnimodularMetric

Array = NDArray[np.float64]

_DIRECTIONS = 48
_LARGEST_RADIUS = 12.0
_RADIAL_STEP = 0.1


@dataclass(frozen=True)
class ContourEllipse:
    """r.h.r = radius^2 fitted to a contour.

    Attributes
    ----------
    metric : UnimodularMetric
        h.
    radius : float
        Radius of the circle of equal area, in l_B.
    """

    metric: UnimodularMetric
    radius: float


def contour_radii(pair_correlation: Callable[[Array], Array], level: float, directions: Array) -> Array:
    """Distance at which g first reaches ``level`` in each direction (radians), shape (n,); NaN where it does not."""
    steps = np.arange(_RADIAL_STEP, _LARGEST_RADIUS, _RADIAL_STEP)
    radii = np.full(len(directions), np.nan)
    for k, phi in enumerate(directions):
        unit = np.array([math.cos(phi), math.sin(phi)])
        above = np.flatnonzero(pair_correlation(steps[:, None] * unit) >= level)
        if len(above) and above[0] > 0:
            last = steps[above[0]]

            def excess(r: float, unit: Array = unit) -> float:
                return float(pair_correlation(r * unit[None, :])[0]) - level

            radii[k] = brentq(excess, last - _RADIAL_STEP, last, xtol=1e-8)
    return radii


def fitted_ellipse(pair_correlation: Callable[[Array], Array], level: float) -> ContourEllipse:
    """Least-squares ellipse through the contour g = level about the origin.

    1/r(phi)^2 of an ellipse is linear in its matrix: 1/r^2 = u.h.u/radius^2 with the unit vector u.

    Raises
    ------
    ValueError
        If the contour is open.
    """
    phi = math.pi * np.arange(_DIRECTIONS) / _DIRECTIONS
    radii = contour_radii(pair_correlation, level, phi)
    if not np.all(np.isfinite(radii)):
        raise ValueError(f"the contour g = {level:g} is not closed within {_LARGEST_RADIUS:g} l_B")
    c, s = np.cos(phi), np.sin(phi)
    design = np.stack([c**2, 2.0 * c * s, s**2], axis=-1)
    xx, xy, yy = np.linalg.lstsq(design, 1.0 / radii**2, rcond=None)[0]
    matrix = np.array([[xx, xy], [xy, yy]])
    return ContourEllipse(UnimodularMetric.from_matrix(matrix), float(np.linalg.det(matrix) ** -0.25))
