"""The Moore-Read state on the torus by theta functions, built without the package under test.

Psi = Pf[theta_a(v_ij)/theta_1(v_ij)] prod_{i<j} theta_1(v_ij)^m without the centre of mass, v = pi (a + b tau),
a = 2, 3, 4 in the sectors 1, 2, 3 (Greiter, Wen and Wilczek, Nucl. Phys. B 374, 567 (1992)).
"""

from __future__ import annotations

from collections.abc import Sequence

import mpmath
import numpy as np
from numpy.typing import NDArray

from tests.exact.torus_theta import log_weight as log_laughlin_weight
from tests.exact.torus_theta import log_weight_mpmath as log_laughlin_weight_mpmath

Array = NDArray[np.float64]

# theta_2, theta_3, theta_4 as sums over n of sign^n q^(n + shift)^2 exp(2 i (n + shift) v).
_SHIFT_AND_SIGN = {1: (0.5, 1.0), 2: (0.0, 1.0), 3: (0.0, -1.0)}


def pfaffian(matrix: Sequence[Sequence[mpmath.mpc]], rows: tuple[int, ...]) -> mpmath.mpc:
    """Sum over all pairings of the rows, with signs."""
    if not rows:
        return mpmath.mpf(1)
    first, rest = rows[0], rows[1:]
    return mpmath.fsum(
        (-1) ** k * matrix[first][rest[k]] * pfaffian(matrix, rest[:k] + rest[k + 1 :]) for k in range(len(rest))
    )


def log_weight_mpmath(exponent: int, sector: int, a: Array, b: Array, tau: complex) -> mpmath.mpf:
    """log |Psi|^2 of positions of shape (n_electrons,) to the working precision of mpmath, all pairings summed."""
    modulus = mpmath.mpc(tau.real, tau.imag)
    nome = mpmath.exp(1j * mpmath.pi * modulus)
    v = [mpmath.pi * (mpmath.mpf(float(x)) + mpmath.mpf(float(y)) * modulus) for x, y in zip(a, b, strict=True)]
    n = len(v)
    matrix = [[mpmath.mpc(0)] * n for _ in range(n)]
    for i in range(n):
        for j in range(i):
            ratio = mpmath.jtheta(sector + 1, v[i] - v[j], nome) / mpmath.jtheta(1, v[i] - v[j], nome)
            matrix[i][j], matrix[j][i] = ratio, -ratio
    return 2 * mpmath.log(abs(pfaffian(matrix, tuple(range(n))))) + log_laughlin_weight_mpmath(exponent, a, b, tau)


def _theta(shift: float, sign: float, a: Array, b: Array, tau: complex) -> NDArray[np.complex128]:
    """The series times exp(-pi Im(tau) b^2), which every theta function shares."""
    total = np.zeros(np.shape(a), dtype=complex)
    for n in range(-6, 7):
        k = n + shift
        phase = np.pi * (tau.real * k**2 + 2.0 * k * (a + b * tau.real))
        total += sign**n * np.exp(1j * phase - np.pi * tau.imag * (k + b) ** 2)
    return total


def log_weight(exponent: int, sector: int, a: Array, b: Array, tau: complex) -> float:
    """log |Psi|^2 in floats, |Pf|^2 as a determinant, of positions of shape (n_electrons,)."""
    da, db = (x[:, None] - x[None, :] + np.eye(len(x)) * 0.1 for x in (a, b))
    matrix = _theta(*_SHIFT_AND_SIGN[sector], da, db, tau) / _theta(0.5, -1.0, da, db, tau)
    np.fill_diagonal(matrix, 0.0)
    return float(np.linalg.slogdet(matrix)[1] + log_laughlin_weight(exponent, a, b, tau))
