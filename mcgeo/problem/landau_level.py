"""Landau orbits: the form factor through which guiding centres see an interaction."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.interaction import Interaction

Array = NDArray[np.float64]

LOWEST = 0
LARGEST_LEVEL = 2

# exp(-p^2/2) L_n(p^2/2)^2 is below 1e-11 of its value at 0 beyond this norm, up to level 2.
ORBIT_RANGE = 9.0


class Orbit(Protocol):
    """What a problem asks of the orbit of one electron; wavevectors have the shape (..., 2)."""

    @property
    def metric(self) -> UnimodularMetric:
        """Shape of the orbit seen along the normal of the plane."""

    @property
    def reach(self) -> float:
        """Norm |q| in the orbit's metric beyond which v(q) is negligible."""

    def form_factor_sq(self, wavevectors: Array) -> Array:
        """F(q)^2, squared transform of the density of one orbit seen along the normal of the plane."""

    def effective_potential(self, wavevectors: Array, interaction: Interaction) -> Array:
        """v(q), the interaction of guiding centres."""


def laguerre(level: int, x: Array) -> Array:
    """L_n(x) by its recurrence; much quicker than a hypergeometric function at small n."""
    before, value = np.zeros_like(x), np.ones_like(x)
    for n in range(level):
        before, value = value, ((2 * n + 1 - x) * value - n * before) / (n + 1)
    return value


def form_factor_sq(wavevectors: Array, level: int, orbit_metric: UnimodularMetric) -> Array:
    """F_n(q)^2 = L_n(|q|^2/2)^2 exp(-|q|^2/2) with |q|^2 = q.g_L^-1.q, for wavevectors of shape (..., 2).

    Source: R. E. Prange and S. M. Girvin (eds.), The Quantum Hall Effect (Springer, 1990), for the isotropic orbit; an
    anisotropic mass gives the same function of the orbit metric's norm.
    """
    half = 0.5 * orbit_metric.wavevector_norm_sq(wavevectors)
    gaussian = np.exp(-half)
    return np.asarray(laguerre(level, half) ** 2 * gaussian if level else gaussian)


@dataclass(frozen=True)
class LandauOrbit:
    """Orbit of an infinitely thin layer in a field across the plane: its shape is the mass metric.

    Parameters
    ----------
    metric : UnimodularMetric
        g_L, equal to the mass metric.
    level : int
        Landau level n.
    """

    metric: UnimodularMetric
    level: int = LOWEST

    @property
    def reach(self) -> float:
        """Norm |q| in the orbit's metric beyond which v(q) is negligible."""
        return ORBIT_RANGE

    def form_factor_sq(self, wavevectors: Array) -> Array:
        """F_n(q)^2."""
        return form_factor_sq(wavevectors, self.level, self.metric)

    def effective_potential(self, wavevectors: Array, interaction: Interaction) -> Array:
        """V(q) F_n(q)^2, unless the interaction acts on guiding centres themselves."""
        return interaction.guiding_centre_potential(wavevectors, self.form_factor_sq(wavevectors))
