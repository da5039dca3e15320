"""Gradient of log |Psi|^2 of the Moore-Read state on the torus from the stored inverse, eight walkers at a time.

With A the Pfaffian matrix, B its inverse and d = d/dlog w_i, Jacobi's formula for an antisymmetric matrix gives

    d log Pf A = sum_j B_ji d A_ij,    H_i = sum_j [B_ji d A_ij + m h_ij],    h = d log theta_1.

In the notation of `mcgeo.kernels.moore_read_pairs`, with o = r - 1/r = d c,

    h = (r + 1) / [2 (r - 1)] + o D'/D,
    d A / A = h_a - h,    h_2 = (r - 1) / [2 (r + 1)] + o N'/N,    h_3, h_4 = o N'/N.

h and B_ji d A_ij are odd under exchange of i and j, so each pair is met once. The phases of sqrt(w_i) that the stored
matrices of the sectors theta_3 and theta_4 leave out cancel between B_ji and A_ij. With the Gaussian of |s|^2

    d/dx_i log |Psi|^2 = -(4 pi / L1) Im H_i,
    d/dy_i log |Psi|^2 = -(4 pi / L1) [Re H_i + m sum_j (b_i - b_j)],

x along L1.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.lanes import LANES, load, splat, store
from mcgeo.kernels.moore_read_inverses import SUM_B


@kernel
def _polynomial_and_slope(coefficients: np.ndarray, cr: Any, ci: Any) -> Any:
    """P(c) and P'(c), real and imaginary parts, by Horner's rule."""
    pr, pi = splat(coefficients[0, 0]), splat(coefficients[0, 1])
    sr, si = splat(0.0), splat(0.0)
    for k in range(1, coefficients.shape[0]):
        sr, si = sr * cr - si * ci + pr, sr * ci + si * cr + pi
        pr, pi = pr * cr - pi * ci + coefficients[k, 0], pr * ci + pi * cr + coefficients[k, 1]
    return pr, pi, sr, si


@kernel
def _product(xr: Any, xi: Any, yr: Any, yi: Any) -> Any:
    return xr * yr - xi * yi, xr * yi + xi * yr


@kernel
def _pair(tables: Any, factors: np.ndarray, i: int, j: int, br: Any, bi: Any) -> Any:
    """B_ji d A_ij + m h_ij for B_ji = br + i bi."""
    m = 1.0 * tables.exponent
    xr, xi = load(factors, 5 * j), load(factors, 5 * j + 1)
    yr, yi = load(factors, 5 * j + 2), load(factors, 5 * j + 3)
    rr, ri = _product(load(factors, 5 * i), load(factors, 5 * i + 1), yr, yi)
    vr, vi = _product(load(factors, 5 * i + 2), load(factors, 5 * i + 3), xr, xi)
    odd_r, odd_i = rr - vr, ri - vi
    dr, di, er, ei = _polynomial_and_slope(tables.denominator, rr + vr, ri + vi)
    nr, ni, sr, si = _polynomial_and_slope(tables.numerator, rr + vr, ri + vi)
    # 1 / [(r - 1) D]
    tr, ti = _product(rr - 1.0, ri, dr, di)
    scale = 1.0 / (tr * tr + ti * ti)
    tr, ti = tr * scale, ti * scale * (-1.0)
    # h = {(r + 1) D / 2 + o (r - 1) D'} / [(r - 1) D]
    kr, ki = _product(rr - 1.0, ri, er, ei)
    kr, ki = _product(odd_r, odd_i, kr, ki)
    hr, hi = _product((rr + 1.0) * 0.5, ri * 0.5, dr, di)
    hr, hi = _product(hr + kr, hi + ki, tr, ti)
    # d A = {d X - h X} / [(r - 1) D], X = (r + 1) N for theta_2, X = N times factors of single electrons otherwise
    sr, si = _product(odd_r, odd_i, sr, si)
    if tables.half_phases == 0:
        sr, si = _product(rr + 1.0, ri, sr, si)
        kr, ki = _product((rr - 1.0) * 0.5, ri * 0.5, nr, ni)
        sr, si = sr + kr, si + ki
        nr, ni = _product(rr + 1.0, ri, nr, ni)
    else:
        # sqrt|w_i w_j| / w_j
        scale = load(factors, 5 * i + 4) * load(factors, 5 * j + 4)
        br, bi = _product(br, bi, yr * scale, yi * scale)
    kr, ki = _product(hr, hi, nr, ni)
    sr, si = _product(sr - kr, si - ki, tr, ti)
    sr, si = _product(sr, si, br, bi)
    return sr + hr * m, si + hi * m


@kernel
def _gather_column(inverses: np.ndarray, n_blocks: int, i: int, column: np.ndarray) -> None:
    """Entries j < i of column i of the inverses, walkers side by side: minus row i."""
    for lane in range(LANES):
        real, imag = inverses[lane, 0], inverses[lane, 1]
        for j in range(i):
            place = i * n_blocks + (j >> 3)
            column[2 * j, lane] = -real[place, j & 7]
            column[2 * j + 1, lane] = -imag[place, j & 7]


@kernel
def moore_read_forces(tables: Any, b: np.ndarray, storage: Any, forces: np.ndarray) -> None:
    """Gradient of log |Psi|^2, centre of mass left out, in Cartesian coordinates with x along L1.

    Parameters
    ----------
    tables : MooreReadTorusTables
    b : ndarray, shape (n_electrons, 8)
    storage : MooreReadStorage
        True to ``b``; its scratch is written.
    forces : ndarray, shape (2 n_electrons, 8)
        Written: rows 2i and 2i + 1 hold the derivatives by x_i and y_i, in 1/l_B.
    """
    n = b.shape[0]
    forces[:] = 0.0
    for i in range(1, n):
        _gather_column(storage.inverses, storage.vectors.shape[1], i, storage.column)
        total_r, total_i = splat(0.0), splat(0.0)
        for j in range(i):
            hr, hi = _pair(
                tables, storage.factors, i, j, load(storage.column, 2 * j), load(storage.column, 2 * j + 1)
            )  # fmt: skip
            total_r, total_i = total_r + hr, total_i + hi
            store(forces, 2 * j, load(forces, 2 * j) - hr)
            store(forces, 2 * j + 1, load(forces, 2 * j + 1) - hi)
        store(forces, 2 * i, load(forces, 2 * i) + total_r)
        store(forces, 2 * i + 1, load(forces, 2 * i + 1) + total_i)
    unit, m = -4.0 * math.pi / tables.side, 1.0 * tables.exponent
    sum_b = load(storage.lanes, SUM_B)
    for j in range(n):
        real, imag = load(forces, 2 * j), load(forces, 2 * j + 1)
        store(forces, 2 * j, imag * unit)
        store(forces, 2 * j + 1, (real + (load(b, j) * (1.0 * n) - sum_b) * m) * unit)
