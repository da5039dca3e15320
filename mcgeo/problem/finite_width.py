"""Coulomb interactions of a layer of finite width: V(q) = (2 pi/q) F(q).

Electrons with the density rho(z) across the layer interact by F(q) = int dz dz' rho(z) rho(z') e^(-q|z - z'|) (T.
Ando, A. B. Fowler and F. Stern, Rev. Mod. Phys. 54, 437 (1982)). F(0) = 1, and F = 1 at zero width: the Coulomb
interaction.
"""

from __future__ import annotations

import math
from abc import abstractmethod
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import erfcx

from mcgeo.problem.pair_potential import IsotropicPotential

Array = NDArray[np.float64]

# Here the closed form has lost a factor of forty in relative accuracy, and the series needs few terms.
_SERIES_BELOW = 0.05
_SERIES_TERMS = 8


class FiniteWidth(IsotropicPotential):
    """V(q) = (2 pi/q) F(q)."""

    @abstractmethod
    def form_factor(self, wavenumbers: Array) -> Array:
        """F(q) of the density across the layer."""

    def radial(self, wavenumbers: Array) -> Array:
        """(2 pi/q) F(q)."""
        return np.asarray(2.0 * math.pi * self.form_factor(wavenumbers) / wavenumbers)


@dataclass(frozen=True)
class SquareWell(FiniteWidth):
    """Lowest state of an infinitely deep well, rho(z) = (2/w) cos^2(pi z/w) on |z| < w/2.

    With x = qw, F = [3x + 8 pi^2/x - 32 pi^4 (1 - e^-x)/(x^2 (x^2 + 4 pi^2))]/(x^2 + 4 pi^2), here in the form {3x + 8
    pi^2 [x + 4 pi^2 psi(x)]/(x^2 + 4 pi^2)}/(x^2 + 4 pi^2), psi(x) = (e^-x - 1 + x)/x^2, that loses no digits at small
    x.

    Parameters
    ----------
    width : float
        w in l_B.
    """

    width: float

    @property
    def name(self) -> str:
        """Name with the width."""
        return f"Coulomb in a square well of width {self.width:g} l_B"

    def form_factor(self, wavenumbers: Array) -> Array:
        """F(q)."""
        x = self.width * np.asarray(wavenumbers)
        denominator = x**2 + 4.0 * math.pi**2
        return np.asarray(
            (3.0 * x + 8.0 * math.pi**2 * (x + 4.0 * math.pi**2 * _psi(x)) / denominator) / denominator
        )


def _psi(x: Array) -> Array:
    """(e^-x - 1 + x)/x^2 = sum_k (-x)^k/(k+2)! for x >= 0."""
    series = np.zeros_like(x)
    near = np.minimum(x, _SERIES_BELOW)
    for k in range(_SERIES_TERMS, -1, -1):
        series = 1.0 / math.factorial(k + 2) - near * series
    far = np.maximum(x, _SERIES_BELOW)
    return np.where(x < _SERIES_BELOW, series, (np.expm1(-far) + far) / far**2)


@dataclass(frozen=True)
class FangHoward(FiniteWidth):
    """Heterojunction, rho(z) = (b^3/2) z^2 e^(-bz) on z > 0: F = (8 + 9x + 3x^2)/(8 (1 + x)^3), x = q/b.

    Source: F. F. Fang and W. E. Howard, Phys. Rev. Lett. 16, 797 (1966). The mean distance from the interface is 3/b.

    Parameters
    ----------
    parameter : float
        b in 1/l_B.
    """

    parameter: float

    @property
    def name(self) -> str:
        """Name with the parameter."""
        return f"Coulomb at a Fang-Howard interface of parameter {self.parameter:g}/l_B"

    def form_factor(self, wavenumbers: Array) -> Array:
        """F(q)."""
        x = wavenumbers / self.parameter
        return np.asarray((8.0 + (9.0 + 3.0 * x) * x) / (8.0 * (1.0 + x) ** 3))


@dataclass(frozen=True)
class GaussianWell(FiniteWidth):
    """Density rho(z) = exp(-z^2/2s^2)/sqrt(2 pi s^2), the lowest state of a parabolic well: F = e^(q^2 s^2) erfc(qs).

    z - z' has a Gaussian density of variance 2 s^2, and int e^(-q|z|) over it is that.

    Parameters
    ----------
    width : float
        s in l_B, the standard deviation of the density.
    """

    width: float

    @property
    def name(self) -> str:
        """Name with the width."""
        return f"Coulomb in a Gaussian layer of standard deviation {self.width:g} l_B"

    def form_factor(self, wavenumbers: Array) -> Array:
        """F(q)."""
        return np.asarray(erfcx(self.width * np.asarray(wavenumbers)))


@dataclass(frozen=True)
class Softened(FiniteWidth):
    """V(r) = 1/sqrt(r^2 + d^2), F(q) = e^(-qd).

    Source: F. C. Zhang and S. Das Sarma, Phys. Rev. B 33, 2903 (1986).

    Parameters
    ----------
    distance : float
        d in l_B.
    """

    distance: float

    @property
    def name(self) -> str:
        """Name with the distance."""
        return f"Coulomb softened at {self.distance:g} l_B"

    def form_factor(self, wavenumbers: Array) -> Array:
        """F(q)."""
        return np.asarray(np.exp(-self.distance * np.asarray(wavenumbers)))
