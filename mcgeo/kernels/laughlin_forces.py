"""Gradient of log |Psi|^2 of the Laughlin state on the torus from stored phases, eight walkers at a time.

In the notation of `mcgeo.kernels.laughlin_torus`, with r = w_i/w_j and c = r + 1/r, the three near factors of a pair
are (r - 1) D(c) up to powers of the w, D = 1 + q^4 - q^2 c. Since w d/dw c = r - 1/r,

    h = d log s/d log w_i = (r + 1) (1 + 4 q^2 + q^4 - 3 q^2 c) / [2 (r - 1) D(c)],

one complex quotient, odd under exchange. The far images of all electrons follow from the power sums,
sum_k k far_k (w_i^k Q_k - w_i^-k P_k), where an electron's own share cancels. With H_i the total,
dz = L1 dw / (2 pi i w) and the Gaussian of |s|^2,

    d/dx_i log |Psi|^2 = -(4 pi m / L1) Im H_i,
    d/dy_i log |Psi|^2 = -(4 pi m / L1) [Re H_i + sum_j (b_i - b_j)],

x along L1.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.lanes import LANES, load, splat, store


@kernel
def _far_part(tables: Any, sums: np.ndarray, wr: Any, wi: Any, vr: Any, vi: Any) -> Any:
    """sum_k k far_k (w^k Q_k - w^-k P_k) from w and v = 1/w."""
    pr, pi, qr, qi = wr, wi, vr, vi
    real, imag = splat(0.0), splat(0.0)
    for k in range(tables.far.shape[0]):
        sum_pr, sum_pi = load(sums, 4 * k), load(sums, 4 * k + 1)
        sum_qr, sum_qi = load(sums, 4 * k + 2), load(sums, 4 * k + 3)
        xr = pr * sum_qr - pi * sum_qi - qr * sum_pr + qi * sum_pi
        xi = pr * sum_qi + pi * sum_qr - qr * sum_pi - qi * sum_pr
        fr, fi = tables.far[k, 0] * (k + 1.0), tables.far[k, 1] * (k + 1.0)
        real = real + (xr * fr - xi * fi)
        imag = imag + (xr * fi + xi * fr)
        pr, pi = pr * wr - pi * wi, pr * wi + pi * wr
        qr, qi = qr * vr - qi * vi, qr * vi + qi * vr
    return real, imag


@kernel
def _near_parts(tables: Any, factors: np.ndarray, forces: np.ndarray) -> None:
    """Add h of every pair to both its electrons."""
    nome_sq = complex(tables.nome_sq_real, tables.nome_sq_imag)
    constant = 1.0 + nome_sq * nome_sq
    dr0, di0 = constant.real, constant.imag
    nr0, ni0 = (constant + 4.0 * nome_sq).real, (constant + 4.0 * nome_sq).imag
    cr0, ci0 = nome_sq.real, nome_sq.imag
    for i in range(1, factors.shape[0] // 4):
        wr, wi = load(factors, 4 * i), load(factors, 4 * i + 1)
        vr, vi = load(factors, 4 * i + 2), load(factors, 4 * i + 3)
        total_r, total_i = splat(0.0), splat(0.0)
        for j in range(i):
            xr, xi = load(factors, 4 * j), load(factors, 4 * j + 1)
            yr, yi = load(factors, 4 * j + 2), load(factors, 4 * j + 3)
            rr, ri = wr * yr - wi * yi, wr * yi + wi * yr
            cr, ci = rr + (vr * xr - vi * xi), ri + (vr * xi + vi * xr)
            er, ei = cr * cr0 - ci * ci0, cr * ci0 + ci * cr0
            dr, di = dr0 - er, di0 - ei
            nr, ni = nr0 - er * 3.0, ni0 - ei * 3.0
            sr, tr = rr - 1.0, rr + 1.0
            br, bi = sr * dr - ri * di, sr * di + ri * dr
            ar, ai = tr * nr - ri * ni, tr * ni + ri * nr
            scale = 0.5 / (br * br + bi * bi)
            hr, hi = (ar * br + ai * bi) * scale, (ai * br - ar * bi) * scale
            total_r, total_i = total_r + hr, total_i + hi
            store(forces, 2 * j, load(forces, 2 * j) - hr)
            store(forces, 2 * j + 1, load(forces, 2 * j + 1) - hi)
        store(forces, 2 * i, load(forces, 2 * i) + total_r)
        store(forces, 2 * i + 1, load(forces, 2 * i + 1) + total_i)


@kernel
def laughlin_forces(
    tables: Any, b: np.ndarray, phases: np.ndarray, sums: np.ndarray, forces: np.ndarray
) -> None:
    """Gradient of log |Psi|^2, centre of mass left out, in Cartesian coordinates with x along L1.

    Parameters
    ----------
    tables : LaughlinTorusTables
    b, phases, sums
        As in `mcgeo.kernels.laughlin_torus.refresh_phases`.
    forces : ndarray, shape (2 n_electrons, 8)
        Written: rows 2i and 2i + 1 hold the derivatives by x_i and y_i, in 1/l_B.
    """
    n = b.shape[0]
    n_powers = tables.far.shape[0]
    factors = np.empty((4 * n, LANES))
    for j in range(n):
        wr, wi = load(phases, 2 * j), load(phases, 2 * j + 1)
        scale = 1.0 / (wr * wr + wi * wi)
        vr, vi = wr * scale, wi * scale * (-1.0)
        store(factors, 4 * j, wr)
        store(factors, 4 * j + 1, wi)
        store(factors, 4 * j + 2, vr)
        store(factors, 4 * j + 3, vi)
        real, imag = _far_part(tables, sums, wr, wi, vr, vi)
        store(forces, 2 * j, real)
        store(forces, 2 * j + 1, imag)
    _near_parts(tables, factors, forces)
    unit = -4.0 * math.pi * tables.exponent / tables.side
    sum_b = load(sums, 4 * n_powers)
    for j in range(n):
        real, imag = load(forces, 2 * j), load(forces, 2 * j + 1)
        store(forces, 2 * j, imag * unit)
        store(forces, 2 * j + 1, (real + load(b, j) * (1.0 * n) - sum_b) * unit)
