"""The Laughlin state on the torus by theta functions, built without the package under test.

With z = L1 (a + b tau), |Psi|^2 = prod_{i<j} |s(z_ij)|^(2m) times a centre-of-mass factor, log |s|^2 = 2 log
|theta_1(pi (a + b tau) | tau)| - 2 pi Im(tau) b^2 (Haldane and Rezayi, Phys. Rev. B 31, 2529 (1985)).
"""

from __future__ import annotations

import math

import mpmath
import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def log_pair_factor_mpmath(a: float, b: float, tau: complex) -> mpmath.mpf:
    """log |s|^2 to the working precision of mpmath."""
    modulus = mpmath.mpc(tau.real, tau.imag)
    z = mpmath.mpf(a) + mpmath.mpf(b) * modulus
    theta = mpmath.jtheta(1, mpmath.pi * z, mpmath.exp(1j * mpmath.pi * modulus))
    return 2 * mpmath.log(abs(theta)) - 2 * mpmath.pi * modulus.imag * mpmath.mpf(b) ** 2


def log_weight_mpmath(exponent: int, a: Array, b: Array, tau: complex) -> mpmath.mpf:
    """log |Psi|^2 without the centre of mass, for positions of shape (n_electrons,)."""
    # Differences are formed in mpmath: they are exact there.
    x, y = ([mpmath.mpf(float(v)) for v in values] for values in (a, b))
    pairs = [(i, j) for i in range(len(x)) for j in range(i)]
    return exponent * mpmath.fsum(log_pair_factor_mpmath(x[i] - x[j], y[i] - y[j], tau) for i, j in pairs)


def log_pair_factor(a: Array, b: Array, tau: complex) -> Array:
    """log |s|^2 in floats by the series of theta_1, shifted so that nothing overflows; arrays of any one shape.

    theta_1 = -i sum_n (-1)^n exp(i pi tau (n + 1/2)^2 + i (2 n + 1) pi z).
    """
    b = np.asarray(b, dtype=float)
    total = np.zeros(np.broadcast(a, b).shape, dtype=complex)
    for n in range(-6, 6):
        # |term| exp(-pi Im(tau) b^2) = exp(-pi Im(tau) (n + 1/2 + b)^2).
        k = n + 0.5
        phase = math.pi * (tau.real * k**2 + 2.0 * k * (a + b * tau.real))
        total += (-1.0) ** n * np.exp(1j * phase - math.pi * tau.imag * (k + b) ** 2)
    with np.errstate(divide="ignore"):
        return np.asarray(2.0 * np.log(np.abs(total)))


def log_weight(exponent: float, a: Array, b: Array, tau: complex) -> Array:
    """log |Psi|^2 without the centre of mass in floats, for positions of shape (n_electrons, ...)."""
    n = len(a)
    return np.asarray(
        sum((exponent * log_pair_factor(a[i] - a[:i], b[i] - b[:i], tau).sum(axis=0) for i in range(1, n)), 0.0)
    )


def centre_of_mass_weight(exponent: int, n_electrons: int, sector: int, a: Array, b: Array, tau: complex) -> Array:
    """|F|^2 with its Gaussian at the sums a, b of all electrons' coordinates, for periodic boundary conditions.

    F = theta[c1, c2](m Z | m tau), c1 = sector/m + (N - 1)/2, c2 = m (N - 1)/2; m sectors. |F|^2 exp(-2 pi m
    Im(tau) b^2) is periodic in a and b.
    """
    c1 = sector / exponent + 0.5 * (n_electrons - 1)
    c2 = 0.5 * exponent * (n_electrons - 1)
    total = np.zeros(np.broadcast(a, b).shape, dtype=complex)
    centre = np.rint(b)
    for n in range(-8, 9):
        k = n - centre + c1 - np.floor(c1)
        phase = math.pi * exponent * tau.real * k**2 + 2.0 * math.pi * k * (exponent * (a + b * tau.real) + c2)
        total += np.exp(1j * phase - math.pi * exponent * tau.imag * (k + b) ** 2)
    return np.asarray(np.abs(total) ** 2)
