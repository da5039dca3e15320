"""The shape one sees: an ellipse fitted to the contour of the correlation hole."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import RectBivariateSpline
from scipy.optimize import brentq

from mcgeo.geometry.metric import UnimodularMetric

Array = NDArray[np.float64]

_DIRECTIONS = 48
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


def contour_radii(x: Array, y: Array, g: Array, level: float, directions: Array) -> Array:
    """Distance from the origin at which g first reaches ``level`` in each direction (radians); NaN where it does not.

    Parameters
    ----------
    x, y : ndarray, shapes (n_x,) and (n_y,)
        Grid that holds the origin well inside.
    g : ndarray, shape (n_y, n_x)
    directions : ndarray, shape (n,)
    """
    spline = RectBivariateSpline(y, x, g)
    largest = min(-x[0], x[-1], -y[0], y[-1])
    radii = np.full(len(directions), np.nan)
    for k, phi in enumerate(directions):
        c, s = math.cos(phi), math.sin(phi)

        def excess(r: float, c: float = c, s: float = s) -> float:
            return float(spline.ev(r * s, r * c)) - level

        steps = np.arange(0.0, largest, _RADIAL_STEP)
        above = np.flatnonzero(spline.ev(steps * s, steps * c) >= level)
        if len(above) and above[0] > 0:
            radii[k] = brentq(excess, steps[above[0] - 1], steps[above[0]], xtol=1e-10)
    return radii


def fitted_ellipse(x: Array, y: Array, g: Array, level: float) -> ContourEllipse | None:
    """Least-squares ellipse through the contour g = level about the origin; None where the map does not close it.

    1/r(phi)^2 of an ellipse is linear in its matrix: 1/r^2 = u.h.u/radius^2 with the unit vector u.
    """
    phi = math.pi * np.arange(_DIRECTIONS) / _DIRECTIONS
    radii = contour_radii(x, y, g, level, phi)
    if not np.all(np.isfinite(radii)):
        return None
    c, s = np.cos(phi), np.sin(phi)
    design = np.stack([c**2, 2.0 * c * s, s**2], axis=-1)
    xx, xy, yy = np.linalg.lstsq(design, 1.0 / radii**2, rcond=None)[0]
    matrix = np.array([[xx, xy], [xy, yy]])
    return ContourEllipse(UnimodularMetric.from_matrix(matrix), float(np.linalg.det(matrix) ** -0.25))
