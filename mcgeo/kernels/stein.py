"""Control variates of eight walkers on the torus: quantities whose mean is exactly zero.

For a smooth periodic pair function phi and Phi = sum_{i<j} phi(r_ij) the sampled weight |Psi|^2 obeys

    < sum_i [ lap_i Phi + grad_i Phi . grad_i log |Psi|^2 ] > = 0,

since |Psi|^2 times the bracket is the divergence of |Psi|^2 grad Phi, whose integral over a torus vanishes (Assaraf and
Caffarel, Phys. Rev. Lett. 83, 4682 (1999)).

Here phi_p = exp(-p r^2 / 2 s^2), powers p of one Gaussian of width s, of the separation r folded into the cell. With
u = r^2 / s^2 and F = grad log |Psi|^2 a pair contributes p exp(-p u/2) [2 p u - 4 - (F_i - F_j).(r_i - r_j)] / s^2.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.elementary import exponential
from mcgeo.kernels.lanes import load, round_to_integer, select, splat, store

# The first power is the widest Gaussian; the kernel forms exactly these from products of one exponential.
POWERS = (1, 2, 3, 4, 6, 8, 12, 16)
# s^2 of the widest and the narrowest Gaussian in units of 1/nu.
_BEST_WIDTH_SQ, _LEAST_WIDTH_SQ = 1.5, 0.09
# Mean zero to a millionth of a standard deviation: seen neither in 1e10 independent configurations, nor through
# coefficients of some ten in a regression on 1e8.
_LARGEST_EDGE_BIAS = 1e-6
_NARROWER = 0.99
# Farther pairs, in r^2/s^2, are taken to be here: exp(-40) is nothing in the widest Gaussian, and the sixteenth power
# of a smaller number would be subnormal, at ten times the time.
_FARTHEST = 80.0


class SteinTables(NamedTuple):
    """Constants of one cell.

    Attributes
    ----------
    tau_real, tau_imag, side : float
        tau and |L1| (l_B) of the isotropic cell.
    width_sq : float
        s^2 of the widest Gaussian in l_B^2.
    n_controls : int
        The first so many of `POWERS` are good controls.
    """

    tau_real: float
    tau_imag: float
    side: float
    width_sq: float
    n_controls: int


def edge_bias(tau: complex, side: float, n_electrons: int, width_sq: float) -> float:
    """Mean of the control of a Gaussian of width s, in units of its standard deviation over configurations.

    Separations are folded into the rectangle of L1 and the height h of the cell, at whose edges the Gaussian is not
    smooth: by Gauss' theorem the identity lacks the flux of grad phi through them,

        N (N - 1)/A oint d phi/dn,   |oint| < sqrt(2 pi) [L1 exp(-L1^2/8 s^2) + h exp(-h^2/8 s^2)] / s,

    the pair correlation being near 1 there. The variance is at least the sum of the squares of all second
    derivatives of Phi, 2 N^2/A int |grad grad phi|^2 d^2r = 4 pi N^2/(A s^2).
    """
    height = side * tau.imag
    edges = sum(length * math.exp(-(length**2) / (8.0 * width_sq)) for length in (side, height))
    return (n_electrons - 1) * edges / math.sqrt(2.0 * side * height)


def stein_tables(tau: complex, side: float, n_electrons: int) -> SteinTables:
    """Tables with the widest Gaussian that serves and fits, and the powers of it that serve.

    The best s^2 was found near 1.5/nu for Laughlin and Moore-Read liquids, with a shallow optimum; cells of some
    thirty electrons and fewer bound it by `edge_bias`. Then the narrowest Gaussians see only rare close pairs: a
    control that is nothing but a few outliers cannot be regressed on.
    """
    inverse_filling = side * side * tau.imag / (2.0 * math.pi * n_electrons)
    width_sq = _BEST_WIDTH_SQ * inverse_filling
    while edge_bias(tau, side, n_electrons, width_sq) > _LARGEST_EDGE_BIAS:
        width_sq *= _NARROWER
    n_controls = sum(width_sq / power >= _LEAST_WIDTH_SQ * inverse_filling for power in POWERS)
    return SteinTables(tau.real, tau.imag, side, width_sq, max(1, n_controls))


@kernel
def add_controls(tables: Any, a: np.ndarray, b: np.ndarray, forces: np.ndarray, total: np.ndarray) -> None:
    """Add the control values of the present configurations.

    Parameters
    ----------
    tables : SteinTables
    a, b : ndarray, shape (n_electrons, 8)
        Positions in units of the cell's vectors.
    forces : ndarray, shape (2 n_electrons, 8)
        Rows 2i and 2i + 1: derivatives of log |Psi|^2 by x_i and y_i (x along L1), in 1/l_B.
    total : ndarray, shape (8, 8)
        Updated: one row per power, in units of n_electrons / s^2.
    """
    n = a.shape[0]
    scale, farthest = 1.0 / tables.width_sq, splat(_FARTHEST)
    c1, c2, c3, c4 = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
    c6, c8, c12, c16 = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
    for i in range(1, n):
        ai, bi = load(a, i), load(b, i)
        fx, fy = load(forces, 2 * i), load(forces, 2 * i + 1)
        for j in range(i):
            db = bi - load(b, j)
            db = db - round_to_integer(db)
            x = ai - load(a, j) + db * tables.tau_real
            x = (x - round_to_integer(x)) * tables.side
            y = db * (tables.tau_imag * tables.side)
            u = (x * x + y * y) * scale
            u = select(u > farthest, farthest, u)
            loss = (fx - load(forces, 2 * j)) * x + (fy - load(forces, 2 * j + 1)) * y + 4.0
            u = u * 2.0
            g1 = exponential(u * (-0.25))
            g2 = g1 * g1
            g3 = g2 * g1
            g4 = g2 * g2
            g6 = g3 * g3
            g8 = g4 * g4
            g12 = g6 * g6
            c1 = c1 + g1 * (u - loss)
            c2 = c2 + g2 * (u * 2.0 - loss)
            c3 = c3 + g3 * (u * 3.0 - loss)
            c4 = c4 + g4 * (u * 4.0 - loss)
            c6 = c6 + g6 * (u * 6.0 - loss)
            c8 = c8 + g8 * (u * 8.0 - loss)
            c12 = c12 + g12 * (u * 12.0 - loss)
            c16 = c16 + g8 * g8 * (u * 16.0 - loss)
    for row, value in enumerate((c1, c2, c3, c4, c6, c8, c12, c16)):
        store(total, row, load(total, row) + value * (POWERS[row] / (1.0 * n)))
