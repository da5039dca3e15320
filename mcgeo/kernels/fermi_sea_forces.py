"""Gradient of log W of the composite-fermion sea on the torus from the stored matrix.

In the notation of `mcgeo.kernels.fermi_sea_torus`, with zeta(u) = d log theta(u) / d log w, an odd function, and
G_ka = (M^-1)_ak M_ka, which no factor common to a row or a column changes,

    H_i = d log Psi / d log w_i
        = sum_{k != i} (Z_ik - Z_ki) - sum_a s_a G_ia + (m - 2) sum_{k != i} zeta(u_i - u_k),
    Z_ki = sum_a G_ka zeta(u_k - u_i - t_a).

With r = w_k e_a / w_i, x = r + 1/r and theta = (r - 1) P(x) up to powers of r,

    zeta = (r + 1) / [2 (r - 1)] + (r - 1/r) P'(x) / P(x).

The exponent of W adds its share,

    d/dx_i log W = -(4 pi / L1) Im H_i,
    d/dy_i log W = -(4 pi / L1) [Re H_i + m sum_j (b_i - b_j) + s],

x along L1. Walkers come one by one, columns along the lanes.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.determinant import lane_vectors, row_width
from mcgeo.kernels.fermi_sea_torus import pair_constants
from mcgeo.kernels.lanes import LANES, load, splat, store
from mcgeo.kernels.pfaffian import invert


@kernel
def _zeta(series: np.ndarray, rr: Any, ri: Any, vr: Any, vi: Any) -> Any:
    """zeta from r and 1/r, lane by lane."""
    xr, xi = rr + vr, ri + vi
    top = series.shape[0] - 1
    pr, pi = splat(series[top, 0]), splat(series[top, 1])
    sr, si = splat(0.0), splat(0.0)
    for n in range(top - 1, -1, -1):
        sr, si = sr * xr - si * xi + pr, sr * xi + si * xr + pi
        pr, pi = pr * xr - pi * xi + series[n, 0], pr * xi + pi * xr + series[n, 1]
    # [(r + 1) P / 2 + (r - 1)(r - 1/r) P'] / [(r - 1) P]
    dr, odd_r, odd_i = rr - 1.0, rr - vr, ri - vi
    sr, si = sr * odd_r - si * odd_i, sr * odd_i + si * odd_r
    sr, si = sr * dr - si * ri, sr * ri + si * dr
    hr, hi = (rr + 1.0) * 0.5, ri * 0.5
    sr, si = sr + (hr * pr - hi * pi), si + (hr * pi + hi * pr)
    pr, pi = pr * dr - pi * ri, pr * ri + pi * dr
    scale = 1.0 / (pr * pr + pi * pi)
    return (sr * pr + si * pi) * scale, (si * pr - sr * pi) * scale


@kernel
def _fill_shares(matrix: np.ndarray, n: int, real: np.ndarray, imag: np.ndarray, shares: np.ndarray) -> None:
    """G of one walker: rows k width + v and the imaginary parts n_vectors below, zero beyond column n - 1."""
    n_vectors, width = lane_vectors(n), row_width(n)
    real[:] = 0.0
    imag[:] = 0.0
    shares[:] = 0.0
    for k in range(n):
        for a in range(n):
            real[k * n_vectors + a // LANES, a % LANES] = matrix[width * k + a // LANES, a % LANES]
            imag[k * n_vectors + a // LANES, a % LANES] = matrix[width * k + n_vectors + a // LANES, a % LANES]
    invert(real, imag, n)
    for k in range(n):
        for a in range(n):
            row, lane = width * k + a // LANES, a % LANES
            mr, mi = matrix[row, lane], matrix[row + n_vectors, lane]
            br, bi = real[a * n_vectors + k // LANES, k % LANES], imag[a * n_vectors + k // LANES, k % LANES]
            shares[row, lane] = mr * br - mi * bi
            shares[row + n_vectors, lane] = mr * bi + mi * br


@kernel
def _share_of_pair(tables: Any, shares: np.ndarray, pairs: np.ndarray, k: int, total: np.ndarray) -> Any:
    """Z_ki for the point i of ``pairs``, with (m - 2) zeta(u_k - u_i) / 2 put to it."""
    n_vectors = lane_vectors(tables.n_electrons)
    row, lane = k // LANES, k % LANES
    xr, xi = pairs[row, lane], pairs[n_vectors + row, lane]
    yr, yi = pairs[2 * n_vectors + row, lane], pairs[3 * n_vectors + row, lane]
    sum_r, sum_i = splat(0.0), splat(0.0)
    for v in range(n_vectors):
        er, ei = load(tables.shifts, 4 * v), load(tables.shifts, 4 * v + 1)
        fr, fi = load(tables.shifts, 4 * v + 2), load(tables.shifts, 4 * v + 3)
        zr, zi = _zeta(tables.series, er * xr - ei * xi, er * xi + ei * xr, fr * yr - fi * yi, fr * yi + fi * yr)
        start = row_width(tables.n_electrons) * k + v
        gr, gi = load(shares, start), load(shares, start + n_vectors)
        sum_r, sum_i = sum_r + (gr * zr - gi * zi), sum_i + (gr * zi + gi * zr)
    if tables.pair_exponent > 0:
        # Half of it here, half from the pair met the other way round; one eighth of that per lane.
        zr, zi = _zeta(tables.series, splat(xr), splat(xi), splat(yr), splat(yi))
        sum_r = sum_r + zr * (tables.pair_exponent / (2.0 * LANES))
        sum_i = sum_i + zi * (tables.pair_exponent / (2.0 * LANES))
    store(total, 0, sum_r)
    store(total, 1, sum_i)
    return total[0].sum(), total[1].sum()


@kernel
def fermi_sea_forces(tables: Any, b: np.ndarray, kept: Any, forces: np.ndarray) -> None:
    """Gradient of log W in Cartesian coordinates with x along L1.

    Parameters
    ----------
    tables : FermiSeaTables
    b : ndarray, shape (n_electrons, 8)
    kept : FermiSeaStore
        True to ``b``.
    forces : ndarray, shape (2 n_electrons, 8)
        Written: rows 2i and 2i + 1 hold the derivatives by x_i and y_i, in 1/l_B.
    """
    n = tables.n_electrons
    n_vectors, width = lane_vectors(n), row_width(n)
    real, imag = np.empty((n * n_vectors, LANES)), np.empty((n * n_vectors, LANES))
    shares, pairs = np.empty((n * width, LANES)), np.empty((5 * n_vectors, LANES))
    total = np.empty((2, LANES))
    forces[:] = 0.0
    for walker in range(LANES):
        electrons = kept.electrons[walker]
        _fill_shares(kept.matrices[walker], n, real, imag, shares)
        for i in range(n):
            row, lane = i // LANES, i % LANES
            point = (
                electrons[row, lane], electrons[n_vectors + row, lane],
                electrons[2 * n_vectors + row, lane], electrons[3 * n_vectors + row, lane],
            )  # fmt: skip
            pair_constants(tables, electrons, point, b[i, walker], pairs)
            for k in range(n):
                if k != i:
                    zr, zi = _share_of_pair(tables, shares, pairs, k, total)
                    forces[2 * k, walker] += zr
                    forces[2 * k + 1, walker] += zi
                    forces[2 * i, walker] -= zr
                    forces[2 * i + 1, walker] -= zi
            for a in range(n):
                place = width * i + a // LANES
                forces[2 * i, walker] -= tables.powers[a] * shares[place, a % LANES]
                forces[2 * i + 1, walker] -= tables.powers[a] * shares[place + n_vectors, a % LANES]
    unit, m = -4.0 * math.pi / tables.side, tables.pair_exponent + 2.0
    for walker in range(LANES):
        sum_b = b[:, walker].sum()
        for i in range(n):
            hr, hi = forces[2 * i, walker], forces[2 * i + 1, walker]
            forces[2 * i, walker] = unit * hi
            forces[2 * i + 1, walker] = unit * (hr + m * (n * b[i, walker] - sum_b) + tables.mean_power)
