"""Closed forms of Laughlin liquids and of the torus, from the literature, evaluated without the package."""

from __future__ import annotations

import math

import mpmath
import numpy as np
from numpy.typing import ArrayLike, NDArray

FILLED_LEVEL_ENERGY = -math.sqrt(math.pi / 8.0)
"""Jancovici, Phys. Rev. Lett. 46, 386 (1981): integral of -(rho/2) exp(-r^2/2)/r."""


def small_q_coefficients(exponent: int) -> tuple[float, float, float]:
    """Of q^2, q^4 and q^6 in S(q) of the Laughlin liquid 1/m.

    Screening: Stillinger and Lovett, J. Chem. Phys. 49, 1991 (1968). Compressibility: Vieillefosse and
    Hansen, Phys. Rev. A 12, 1106 (1975). Sixth moment: Kalinay, Markos, Samaj and Travenec, J. Stat. Phys.
    98, 639 (2000).
    """
    return 0.5, (exponent - 2) / 8.0, (3 * exponent - 4) * (exponent - 3) / 96.0


def epstein_zeta(shape: str, s: float) -> float:
    """sum over non-zero points n of the lattice of unit area of |n|^(-2s), continued analytically.

    4 zeta(s) beta(s) of the square and 6 zeta(s) L(s, chi_-3) (sqrt 3/2)^s of the hexagonal lattice: Borwein,
    Glasser, McPhedran, Wan and Zucker, Lattice Sums Then and Now (Cambridge, 2013), chapter 1.
    """
    if shape == "square":
        return float(4 * mpmath.zeta(s) * mpmath.dirichlet(s, [0, 1, 0, -1]))
    return float(6 * mpmath.zeta(s) * mpmath.dirichlet(s, [0, 1, -1]) * (mpmath.sqrt(3) / 2) ** s)


def finite_size_energy(exponent: int, electrons: int, shape: str) -> float:
    """Coulomb energy per electron of the Laughlin liquid on its cell above that on the plane.

    Where S(q) is the plane's on every wave, the sum over waves differs from the integral by zeta sums of the
    powers of q in (2 pi/q) S(q): with b = 2 pi/sqrt(A), (1/2A) sum_k 2 pi s_k b^(k-1) Z((1-k)/2),
    k = 2, 4, 6.
    """
    area = 2.0 * math.pi * exponent * electrons
    unit = 2.0 * math.pi / math.sqrt(area)
    terms = zip((2, 4, 6), small_q_coefficients(exponent), strict=True)
    return sum(math.pi / area * s * unit ** (k - 1) * epstein_zeta(shape, (1 - k) / 2) for k, s in terms)


def agm_factor(stretch: float) -> float:
    """1/AGM(e^(Q/2), e^(-Q/2)): mean of 1/|r| over the ellipse of aspect ratio e^Q and area pi."""
    return float(1 / mpmath.agm(mpmath.exp(stretch / 2), mpmath.exp(-stretch / 2)))


def filled_structure(norm: ArrayLike) -> NDArray[np.float64]:
    """S(q) = 1 - exp(-q^2/2) of the filled level (Jancovici 1981)."""
    return np.asarray(-np.expm1(-0.5 * np.asarray(norm) ** 2))


def filled_correlation_in_bins(edges: NDArray[np.float64], width: float = 1.0) -> NDArray[np.float64]:
    """Mean of g(r) = 1 - exp(-r^2/(2 width^2)) over the rings between edges; the filled level has width 1."""
    scale = 2.0 * width**2
    return np.asarray(1.0 + scale * np.diff(np.exp(-(edges**2) / scale)) / np.diff(edges**2))
