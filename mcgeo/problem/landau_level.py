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


def form_factor_derivatives(wavevectors: Array, level: int, orbit_metric: UnimodularMetric) -> Array:
    """F_n(q)^2 and its derivatives by the flat coordinates (x, y) of the orbit about its metric.

    F^2 = f(h), h = |q|_L^2/2, and a displaced orbit has h [1 - x c - y s + (x^2 + y^2)/2 + ...], c and s the cosine and
    sine of twice the angle of g_L^(-1/2) q: F_x = -c h f', F_xx = h f' + c^2 h^2 f'', F_xy = c s h^2 f'' and so on.

    Parameters
    ----------
    wavevectors : ndarray, shape (..., 2)
        None of them zero.

    Returns
    -------
    ndarray, shape (6, ...)
        F^2, F_x, F_y, F_xx, F_xy, F_yy.
    """
    p = wavevectors @ orbit_metric.inverse_linear_map
    along, across = 0.5 * (p[..., 0] ** 2 - p[..., 1] ** 2), p[..., 0] * p[..., 1]
    h = 0.5 * (p[..., 0] ** 2 + p[..., 1] ** 2)
    c, s = along / h, across / h
    polynomial, gaussian = laguerre(level, h), np.exp(-h)
    # h L' = n (L_n - L_{n-1}) and h L'' = (h - 1) L' - n L (DLMF 18.9.23 and 18.8.1).
    slope = level * (polynomial - laguerre(level - 1, h)) if level else np.zeros_like(h)
    bend = (h - 1.0) * slope - level * h * polynomial
    first = (2.0 * polynomial * slope - h * polynomial**2) * gaussian
    second = 2.0 * (slope**2 + polynomial * bend) - 4.0 * h * polynomial * slope + (h * polynomial) ** 2
    second = second * gaussian
    return np.stack(
        [
            polynomial**2 * gaussian,
            -c * first,
            -s * first,
            first + c * c * second,
            c * s * second,
            first + s * s * second,
        ]
    )


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
