"""The energy of one liquid along a line of metrics."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.statistics import jackknife_error, jackknife_means
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.variational.energy_surface import Surface
from mcgeo.variational.minimum import Minimum

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class EnergyCurve:
    """E along one direction of the metric.

    Attributes
    ----------
    stretch : ndarray, shape (n,)
        Signed Q along ``angle``: negative means the same |Q| turned by a right angle.
    angle : float
        theta in radians.
    energy, error : ndarray, shape (n,)
    difference_error : ndarray, shape (n,)
        Error of E(Q) - E(Q*): the errors along the curve are strongly correlated.
    """

    stretch: Array
    angle: float
    energy: Array
    error: Array
    difference_error: Array


def energy_curve(surface: Surface, minimum: Minimum, angle: float, stretches: Array) -> EnergyCurve:
    """Energies at signed stretches of shape (n,) along ``angle`` (radians)."""
    at_minimum = surface.sample_energies(minimum.metric)
    samples = np.stack([surface.sample_energies(UnimodularMetric(q, angle)) for q in stretches], axis=-1)
    return EnergyCurve(
        stretches,
        angle,
        samples.mean(axis=0),
        jackknife_error(jackknife_means(samples)),
        jackknife_error(jackknife_means(samples - at_minimum[:, None])),
    )
