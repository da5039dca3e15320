"""Inverse of an antisymmetric complex matrix, kept while one of its rows (and columns) at a time is exchanged.

With A antisymmetric, B = A^-1 and row i exchanged for a' (a'_i = 0; column i for -a'), Woodbury's formula with two
columns gives, writing b for column i of B,

    Pf A' / Pf A = a'.b = p,        B' = B + (b t^T - t b^T) / p,        t = B a' + e_i,

B' again antisymmetric (for the ratio: Bajdich, Mitas, Wagner and Schmidt, Phys. Rev. B 77, 115112 (2008)).
|Pf A|^2 = |det A|, whose logarithm comes with the inverse by elimination.

A matrix of one walker is two arrays, real and imaginary part, of shape (n * n_blocks, 8), n_blocks = ceil(n/8): row
j holds its n entries in n_blocks vectors of eight lanes, the last one filled up with zeros. A vector is two arrays of
shape (n_blocks, 8).
"""

from __future__ import annotations

import math

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.lanes import LANES, load, splat, store


@kernel
def _pivot_row(real: np.ndarray, imag: np.ndarray, n: int, n_blocks: int, column: int) -> int:
    """Row below the diagonal with the largest entry in ``column``."""
    best, largest = column, -1.0
    for j in range(column, n):
        row = j * n_blocks + column // LANES
        size = real[row, column % LANES] ** 2 + imag[row, column % LANES] ** 2
        if size > largest:
            best, largest = j, size
    return best


@kernel
def _exchange_rows(matrix: np.ndarray, n_blocks: int, first: int, second: int) -> None:
    for block in range(n_blocks):
        held = load(matrix, first * n_blocks + block)
        store(matrix, first * n_blocks + block, load(matrix, second * n_blocks + block))
        store(matrix, second * n_blocks + block, held)


@kernel
def _exchange_columns(matrix: np.ndarray, n: int, n_blocks: int, first: int, second: int) -> None:
    for j in range(n):
        top = j * n_blocks
        held = matrix[top + first // LANES, first % LANES]
        matrix[top + first // LANES, first % LANES] = matrix[top + second // LANES, second % LANES]
        matrix[top + second // LANES, second % LANES] = held


@kernel
def _subtract_multiple(
    real: np.ndarray, imag: np.ndarray, n_blocks: int, target: int, source: int, fr: float, fi: float
) -> None:
    """Row ``target`` -= f times row ``source``."""
    for block in range(n_blocks):
        xr, xi = load(real, source * n_blocks + block), load(imag, source * n_blocks + block)
        row = target * n_blocks + block
        store(real, row, load(real, row) - xr * fr + xi * fi)
        store(imag, row, load(imag, row) - xr * fi - xi * fr)


@kernel
def invert(real: np.ndarray, imag: np.ndarray, n: int) -> float:
    """Put the inverse in the matrix's place and return log |det| of the matrix: Gauss-Jordan with row pivoting.

    Parameters
    ----------
    real, imag : ndarray, shape (n * n_blocks, 8)
    n : int
    """
    n_blocks = (n + LANES - 1) // LANES
    exchanged = np.empty(n, dtype=np.int64)
    log_determinant = 0.0
    for k in range(n):
        pivot = _pivot_row(real, imag, n, n_blocks, k)
        exchanged[k] = pivot
        if pivot != k:
            _exchange_rows(real, n_blocks, k, pivot)
            _exchange_rows(imag, n_blocks, k, pivot)
        place, lane = k * n_blocks + k // LANES, k % LANES
        size = real[place, lane] ** 2 + imag[place, lane] ** 2
        log_determinant += 0.5 * math.log(size)
        pr, pi = real[place, lane] / size, -imag[place, lane] / size
        real[place, lane], imag[place, lane] = 1.0, 0.0
        # Row k times 1/pivot: subtract (1 - 1/pivot) times itself.
        _subtract_multiple(real, imag, n_blocks, k, k, 1.0 - pr, -pi)
        for j in range(n):
            if j == k:
                continue
            entry = j * n_blocks + k // LANES
            fr, fi = real[entry, lane], imag[entry, lane]
            real[entry, lane], imag[entry, lane] = 0.0, 0.0
            _subtract_multiple(real, imag, n_blocks, j, k, fr, fi)
    for k in range(n - 1, -1, -1):
        if exchanged[k] != k:
            _exchange_columns(real, n, n_blocks, k, exchanged[k])
            _exchange_columns(imag, n, n_blocks, k, exchanged[k])
    return log_determinant


@kernel
def _times_vector(real: np.ndarray, imag: np.ndarray, n: int, vector: np.ndarray, result: np.ndarray) -> None:
    """result = B vector for antisymmetric B, as -sum_k vector_k (row k of B), two rows at a time; n is even."""
    n_blocks = vector.shape[1]
    vector_real, vector_imag, result_real, result_imag = vector[0], vector[1], result[0], result[1]
    result[:] = 0.0
    for k in range(0, n, 2):
        block, lane = k >> 3, k & 7
        vr, vi = splat(vector_real[block, lane]), splat(vector_imag[block, lane])
        ur, ui = splat(vector_real[block, lane + 1]), splat(vector_imag[block, lane + 1])
        first = k * n_blocks
        for j in range(n_blocks):
            xr, xi = load(real, first + j), load(imag, first + j)
            yr, yi = load(real, first + n_blocks + j), load(imag, first + n_blocks + j)
            store(result_real, j, load(result_real, j) - xr * vr + xi * vi - yr * ur + yi * ui)
            store(result_imag, j, load(result_imag, j) - xr * vi - xi * vr - yr * ui - yi * ur)


@kernel
def _add_exchange(real: np.ndarray, imag: np.ndarray, n: int, s: np.ndarray, t: np.ndarray) -> None:
    """B += s t^T - t s^T."""
    n_blocks = s.shape[1]
    s_real, s_imag, t_real, t_imag = s[0], s[1], t[0], t[1]
    for j in range(n):
        block, lane = j >> 3, j & 7
        sr, si = splat(s_real[block, lane]), splat(s_imag[block, lane])
        tr, ti = splat(t_real[block, lane]), splat(t_imag[block, lane])
        for k in range(n_blocks):
            place = j * n_blocks + k
            xr, xi, yr, yi = load(t_real, k), load(t_imag, k), load(s_real, k), load(s_imag, k)
            store(real, place, load(real, place) + sr * xr - si * xi - tr * yr + ti * yi)
            store(imag, place, load(imag, place) + sr * xi + si * xr - tr * yi - ti * yr)


@kernel
def exchange_row(real: np.ndarray, imag: np.ndarray, n: int, i: int, row: np.ndarray, work: np.ndarray) -> None:
    """Update the inverse for row i of the matrix exchanged for ``row``.

    Parameters
    ----------
    real, imag : ndarray, shape (n * n_blocks, 8)
        The inverse B; updated.
    n, i : int
        n is even.
    row : ndarray, shape (2, n_blocks, 8)
        Real and imaginary part of a', with a'_i = 0.
    work : ndarray, shape (4, n_blocks, 8)
        Scratch.
    """
    n_blocks = row.shape[1]
    t, s = work[:2], work[2:]
    _times_vector(real, imag, n, row, t)
    block, lane = i // LANES, i % LANES
    # (B a')_i = -a'.b = -p
    pr, pi = -t[0, block, lane], -t[1, block, lane]
    size = pr * pr + pi * pi
    t[0, block, lane] += 1.0
    # s = b / p with b = -(row i of B)
    fr, fi = -pr / size, pi / size
    for k in range(n_blocks):
        xr, xi = load(real, i * n_blocks + k), load(imag, i * n_blocks + k)
        store(s[0], k, xr * fr - xi * fi)
        store(s[1], k, xr * fi + xi * fr)
    # Row i of the result is b/p and would not need the sum, but writing b/p there lets errors grow a hundredfold.
    _add_exchange(real, imag, n, s, t)
