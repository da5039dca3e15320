"""Interactions that fall with a power of the distance."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import gamma, gammaincc

from mcgeo.errors import GeometryError
from mcgeo.geometry.cell import Cell, lattice_points
from mcgeo.problem.pair_potential import IsotropicPotential

Array = NDArray[np.float64]

# exp(-6.2^2) is 2e-17.
_CUT = 6.2


@dataclass(frozen=True)
class PowerLaw(IsotropicPotential):
    """V(r) = 1/r^p, V(q) = 2 pi 2^(1-p) Gamma(1 - p/2)/Gamma(p/2) q^(p-2), in the units of 1/r.

    Parameters
    ----------
    exponent : float
        p, between 0 and 2.

    Raises
    ------
    GeometryError
        If p is not between 0 and 2, where the transform exists.
    """

    exponent: float

    def __post_init__(self) -> None:
        if not 0.0 < self.exponent < 2.0:
            raise GeometryError(f"the exponent of a power law must be between 0 and 2, not {self.exponent}")

    @property
    def name(self) -> str:
        """Name with the exponent."""
        return f"power law 1/r^{self.exponent:g}"

    def radial(self, wavenumbers: Array) -> Array:
        """2 pi 2^(1-p) Gamma(1 - p/2)/Gamma(p/2) q^(p-2)."""
        p = self.exponent
        factor = math.pi * 2.0 ** (2.0 - p) * math.gamma(1.0 - 0.5 * p) / math.gamma(0.5 * p)
        return np.asarray(factor * np.asarray(wavenumbers) ** (p - 2.0))

    def self_energy(self, cell: Cell) -> float:
        """Ewald's sum for r^-p = (1/Gamma(p/2)) int dt t^(p/2-1) e^(-t r^2), the integral divided at t = split^2.

        The part above is summed over images, the part below over wavevectors; both are incomplete gamma functions.
        """
        lattice, _ = cell.reduced()
        half, area = 0.5 * self.exponent, lattice.area
        split = math.sqrt(math.pi / area)
        images = lattice_points(lattice.vectors, _CUT / split)
        distance_sq = np.sum(images**2, axis=-1)
        near = np.sum(gammaincc(half, split**2 * distance_sq) * distance_sq**-half)
        waves = lattice_points(np.asarray(2.0 * math.pi * np.linalg.inv(lattice.vectors).T), 2.0 * split * _CUT)
        quarter_sq = 0.25 * np.sum(waves**2, axis=-1)
        # The regularised function times Gamma(1 - p/2), the latter being part of V(q).
        far = np.sum(self.potential(waves) * gammaincc(1.0 - half, quarter_sq / split**2)) / area
        own = split ** (2.0 * half) / half
        background = math.pi * split ** (2.0 * half - 2.0) / ((1.0 - half) * area)
        return float(near + far - (own + background) / gamma(half))
