"""Value, gradient and Hessian of an energy surface at a metric, for every block sample at once.

Derivatives are taken in the flat (normal) coordinates (x, y) about the metric, g(x, y) =
`UnimodularMetric.displaced`, by central differences of fourth order: error about h^4/30 of the sixth derivative,
rounding about 1e-15/h^2.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

_STEP = 0.03
# A curvature below this part of the largest is rounding; so is one below the other number.
FLAT = 1e-6
NO_CURVATURE = 1e-16
_FIRST = {-2: 1.0 / 12.0, -1: -8.0 / 12.0, 1: 8.0 / 12.0, 2: -1.0 / 12.0}
_SECOND = {-2: -1.0 / 12.0, -1: 16.0 / 12.0, 0: -30.0 / 12.0, 1: 16.0 / 12.0, 2: -1.0 / 12.0}


@dataclass(frozen=True, eq=False)
class LocalExpansion:
    """Second-order expansion about a point of d coordinates, two for every metric that varies.

    Attributes
    ----------
    energy : ndarray, shape (n_samples,)
    gradient : ndarray, shape (n_samples, d)
    hessian : ndarray, shape (n_samples, d, d)
    """

    energy: Array
    gradient: Array
    hessian: Array

    def above(self, constant: float) -> LocalExpansion:
        """The same with a constant added to the energy."""
        return replace(self, energy=self.energy + constant)

    def downhill_step(self, longest: float) -> Array:
        """Newton's step of the mean, of at most this length; downhill also where a direction curves down."""
        curvature, directions = np.linalg.eigh(self.hessian.mean(axis=0))
        along = directions.T @ self.gradient.mean(axis=0)
        least = max(FLAT * float(np.max(np.abs(curvature))), NO_CURVATURE)
        step = -directions @ (along / np.maximum(np.abs(curvature), least))
        return np.asarray(step * min(1.0, longest / max(float(np.hypot(*step)), NO_CURVATURE)))


def expansion(samples: Callable[[Array], Array], dimension: int) -> LocalExpansion:
    """Expansion about the origin of ``samples(point)``, energies of shape (n_samples,) at a point of shape (d,)."""
    unit = np.eye(dimension) * _STEP
    centre = samples(np.zeros(dimension))
    on_axis = [{k: samples(k * unit[i]) for k in _FIRST} for i in range(dimension)]
    gradient = np.stack([_weighted(_FIRST, values) / _STEP for values in on_axis], axis=-1)
    hessian = np.empty((len(centre), dimension, dimension))
    for i in range(dimension):
        hessian[:, i, i] = _weighted(_SECOND, {**on_axis[i], 0: centre}) / _STEP**2
        for j in range(i):
            hessian[:, i, j] = hessian[:, j, i] = _mixed(samples, unit[i], unit[j])
    return LocalExpansion(centre, gradient, hessian)


def _weighted(weights: Mapping[int, float], values: Mapping[int, Array]) -> Array:
    return np.asarray(np.sum([weight * values[k] for k, weight in weights.items()], axis=0))


def _mixed(samples: Callable[[Array], Array], first: Array, second: Array) -> Array:
    """Mixed derivative: differences of steps h and 2h, combined so that their h^2 errors cancel."""

    def difference(k: int) -> Array:
        signs = ((1, 1, 1.0), (1, -1, -1.0), (-1, 1, -1.0), (-1, -1, 1.0))
        total = np.sum([sign * samples(k * (a * first + b * second)) for a, b, sign in signs], axis=0)
        return np.asarray(total / (4.0 * (k * _STEP) ** 2))

    return (4.0 * difference(1) - difference(2)) / 3.0
