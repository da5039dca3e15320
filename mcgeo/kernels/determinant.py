"""Modulus of the determinant of a complex matrix by blocked elimination, vectorised along its columns.

A matrix of n rows is stored in lanes: row k fills ``row_width(n)`` consecutive rows of an array of shape
(n row_width, 8), first v = ceil(n/8) rows with the real and then v rows with the imaginary parts of its columns.
Columns from n on must hold zeros. The rest of the width is never read: it keeps the rows of one column from falling
on the same few lines of a cache.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.lanes import LANES, load, splat, store

# Columns eliminated together: a divisor of the number of lanes.
_BLOCK = 4
# Moduli of pivots are multiplied until their product leaves this range; then its logarithm is taken.
_LARGEST_PRODUCT = 1e40


@kernel
def lane_vectors(n: int) -> Any:
    """Number of eight-lane vectors that hold ``n`` numbers."""
    return (n + LANES - 1) // LANES


@kernel
def row_width(n: int) -> Any:
    """Rows of the storage per row of the matrix."""
    return 2 * lane_vectors(n) + 1


@kernel
def _swap_rows(array: np.ndarray, first: int, second: int, length: int) -> None:
    for v in range(length):
        held = load(array, first + v)
        store(array, first + v, load(array, second + v))
        store(array, second + v, held)


@kernel
def _clear_column(matrix: np.ndarray, factors: np.ndarray, n: int, j: int, pivot_r: float, pivot_i: float) -> Any:
    """Clear column j below row j inside its own vector of columns, noting the multipliers.

    Returns the row with the largest modulus in column j + 1 of what is left, as far as that column is up to date.
    """
    n_vectors, width = lane_vectors(n), row_width(n)
    v, lane, slot = j // LANES, j % LANES, j % _BLOCK
    next_lane = min(lane + 1, LANES - 1)
    scale = 1.0 / (pivot_r * pivot_r + pivot_i * pivot_i)
    inverse_r, inverse_i = pivot_r * scale, -pivot_i * scale
    tr, ti = load(matrix, width * j + v), load(matrix, width * j + n_vectors + v)
    best, largest = j + 1, -1.0
    for k in range(j + 1, n):
        real, imag = width * k + v, width * k + n_vectors + v
        xr, xi = matrix[real, lane], matrix[imag, lane]
        fr, fi = xr * inverse_r - xi * inverse_i, xr * inverse_i + xi * inverse_r
        factors[k, slot], factors[k, _BLOCK + slot] = fr, fi
        store(matrix, real, load(matrix, real) - tr * fr + ti * fi)
        store(matrix, imag, load(matrix, imag) - ti * fr - tr * fi)
        yr, yi = matrix[real, next_lane], matrix[imag, next_lane]
        modulus_sq = yr * yr + yi * yi
        if modulus_sq > largest:
            best, largest = k, modulus_sq
    return best


@kernel
def _subtract(factors: np.ndarray, k: int, slot: int, tr: Any, ti: Any, ur: Any, ui: Any) -> Any:
    """t - f u with the multiplier f of row k."""
    fr, fi = splat(factors[k, slot]), splat(factors[k, _BLOCK + slot])
    return tr - fr * ur + fi * ui, ti - fr * ui - fi * ur


@kernel
def _update_rest(matrix: np.ndarray, factors: np.ndarray, n: int, start: int) -> None:
    """Apply the elimination of the block of four columns from ``start`` to all vectors of columns after its own."""
    n_vectors, width = lane_vectors(n), row_width(n)
    r0, r1, r2, r3 = width * start, width * (start + 1), width * (start + 2), width * (start + 3)
    for v in range(start // LANES + 1, n_vectors):
        w = n_vectors + v
        ar, ai = load(matrix, r0 + v), load(matrix, r0 + w)
        br, bi = _subtract(factors, start + 1, 0, load(matrix, r1 + v), load(matrix, r1 + w), ar, ai)
        cr, ci = _subtract(factors, start + 2, 0, load(matrix, r2 + v), load(matrix, r2 + w), ar, ai)
        cr, ci = _subtract(factors, start + 2, 1, cr, ci, br, bi)
        dr, di = _subtract(factors, start + 3, 0, load(matrix, r3 + v), load(matrix, r3 + w), ar, ai)
        dr, di = _subtract(factors, start + 3, 1, dr, di, br, bi)
        dr, di = _subtract(factors, start + 3, 2, dr, di, cr, ci)
        store(matrix, r1 + v, br)
        store(matrix, r1 + w, bi)
        store(matrix, r2 + v, cr)
        store(matrix, r2 + w, ci)
        store(matrix, r3 + v, dr)
        store(matrix, r3 + w, di)
        for k in range(start + _BLOCK, n):
            row = width * k
            tr, ti = load(matrix, row + v), load(matrix, row + w)
            tr, ti = _subtract(factors, k, 0, tr, ti, ar, ai)
            tr, ti = _subtract(factors, k, 1, tr, ti, br, bi)
            tr, ti = _subtract(factors, k, 2, tr, ti, cr, ci)
            tr, ti = _subtract(factors, k, 3, tr, ti, dr, di)
            store(matrix, row + v, tr)
            store(matrix, row + w, ti)


@kernel
def _largest_in_column(matrix: np.ndarray, n: int, j: int) -> int:
    n_vectors, width = lane_vectors(n), row_width(n)
    v, lane = j // LANES, j % LANES
    best, largest = j, -1.0
    for k in range(j, n):
        modulus_sq = matrix[width * k + v, lane] ** 2 + matrix[width * k + n_vectors + v, lane] ** 2
        if modulus_sq > largest:
            best, largest = k, modulus_sq
    return best


@kernel
def log_modulus_of_determinant(matrix: np.ndarray, factors: np.ndarray, n: int) -> float:
    """log |det| by Gaussian elimination with partial pivoting (Golub and Van Loan, Matrix Computations, section 3.4).

    Moduli of entries may lie anywhere between exp(-300) and exp(300). A singular matrix gives -inf.

    Parameters
    ----------
    matrix : ndarray, shape (n row_width(n), 8)
        Layout of this module; destroyed.
    factors : ndarray, shape (n, 8)
        Working space.
    """
    n_vectors, width = lane_vectors(n), row_width(n)
    total, product = 0.0, 1.0
    best = 0
    for j in range(n):
        v, lane = j // LANES, j % LANES
        if lane == 0:
            best = _largest_in_column(matrix, n, j)
        if best != j:
            _swap_rows(matrix, width * best, width * j, 2 * n_vectors)
            _swap_rows(factors, best, j, 1)
        pivot_r, pivot_i = matrix[width * j + v, lane], matrix[width * j + n_vectors + v, lane]
        modulus_sq = pivot_r * pivot_r + pivot_i * pivot_i
        if modulus_sq == 0.0:
            return -np.inf
        product *= modulus_sq
        if not (1.0 / _LARGEST_PRODUCT < product < _LARGEST_PRODUCT):
            total += math.log(product)
            product = 1.0
        best = _clear_column(matrix, factors, n, j, pivot_r, pivot_i)
        if j % _BLOCK == _BLOCK - 1:
            _update_rest(matrix, factors, n, j + 1 - _BLOCK)
    return 0.5 * (total + math.log(product))
