"""Value, gradient and Hessian of an energy surface at a metric, for every block sample at once.

Derivatives are taken in the flat (normal) coordinates (x, y) about the metric, g(x, y) =
`UnimodularMetric.displaced`, by central differences of fourth order: error about h^4/30 of the sixth derivative,
rounding about 1e-15/h^2.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.variational.energy_surface import EnergySurface

Array = NDArray[np.float64]

_STEP = 0.03
_FIRST = {-2: 1.0 / 12.0, -1: -8.0 / 12.0, 1: 8.0 / 12.0, 2: -1.0 / 12.0}
_SECOND = {-2: -1.0 / 12.0, -1: 16.0 / 12.0, 0: -30.0 / 12.0, 1: 16.0 / 12.0, 2: -1.0 / 12.0}


@dataclass(frozen=True, eq=False)
class LocalExpansion:
    """Second-order expansion about ``metric``.

    Attributes
    ----------
    metric : UnimodularMetric
    energy : ndarray, shape (n_samples,)
    gradient : ndarray, shape (n_samples, 2)
    hessian : ndarray, shape (n_samples, 2, 2)
    """

    metric: UnimodularMetric
    energy: Array
    gradient: Array
    hessian: Array


def local_expansion(surface: EnergySurface, metric: UnimodularMetric) -> LocalExpansion:
    """Expansion of every sample's energy about ``metric``; all are linear in the samples."""
    reach = range(-2, 3)
    values = {
        (i, j): surface.sample_energies(metric.displaced(i * _STEP, j * _STEP))
        for i in reach
        for j in reach
        if i == 0 or j == 0 or abs(i) == abs(j)
    }
    gradient = np.stack(
        [
            sum(w * values[k, 0] for k, w in _FIRST.items()) / _STEP,
            sum(w * values[0, k] for k, w in _FIRST.items()) / _STEP,
        ],
        axis=-1,
    )
    along = sum(w * values[k, 0] for k, w in _SECOND.items()) / _STEP**2
    across = sum(w * values[0, k] for k, w in _SECOND.items()) / _STEP**2

    def mixed(k: int) -> Array:
        return (values[k, k] - values[k, -k] - values[-k, k] + values[-k, -k]) / (4.0 * (k * _STEP) ** 2)

    # Two mixed differences, of steps h and 2h, combined so that their h^2 errors cancel.
    cross = (4.0 * mixed(1) - mixed(2)) / 3.0
    hessian = np.stack([np.stack([along, cross], axis=-1), np.stack([cross, across], axis=-1)], axis=-2)
    return LocalExpansion(metric, values[0, 0], gradient, hessian)
