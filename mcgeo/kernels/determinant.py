"""Modulus of the determinant of a complex matrix by elimination, vectorised along its columns.

A matrix of n rows is stored in lanes: row k fills 2 v consecutive rows of an array of shape (2 v n, 8), v = ceil(n /
8), first the real and then the imaginary parts of its columns 0..8v-1. Columns from n on must hold zeros.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.lanes import LANES, load, splat, store

# Moduli of pivots are multiplied until their product leaves this range; then its logarithm is taken.
_LARGEST_PRODUCT = 1e40


def lane_vectors(n: int) -> int:
    """Number of eight-lane vectors that hold ``n`` numbers."""
    return -(-n // LANES)


@kernel
def _swap_matrix_rows(matrix: np.ndarray, n_vectors: int, first: int, second: int) -> None:
    for v in range(2 * n_vectors):
        held = load(matrix, 2 * n_vectors * first + v)
        store(matrix, 2 * n_vectors * first + v, load(matrix, 2 * n_vectors * second + v))
        store(matrix, 2 * n_vectors * second + v, held)


@kernel
def _eliminate(matrix: np.ndarray, n: int, n_vectors: int, j: int, pivot_r: float, pivot_i: float) -> Any:
    """Clear column j below row j; returns the row with the largest modulus in column j + 1 of what is left."""
    width = 2 * n_vectors
    first = (j + 1) // LANES
    column, lane = j // LANES, j % LANES
    next_lane = (j + 1) % LANES
    top = width * j
    scale = 1.0 / (pivot_r * pivot_r + pivot_i * pivot_i)
    inverse_r, inverse_i = pivot_r * scale, -pivot_i * scale
    best, largest = j + 1, -1.0
    for k in range(j + 1, n):
        row = width * k
        xr, xi = matrix[row + column, lane], matrix[row + n_vectors + column, lane]
        fr, fi = splat(xr * inverse_r - xi * inverse_i), splat(xr * inverse_i + xi * inverse_r)
        for v in range(first, n_vectors):
            tr, ti = load(matrix, top + v), load(matrix, top + n_vectors + v)
            store(matrix, row + v, load(matrix, row + v) - fr * tr + fi * ti)
            store(matrix, row + n_vectors + v, load(matrix, row + n_vectors + v) - fr * ti - fi * tr)
        yr, yi = matrix[row + first, next_lane], matrix[row + n_vectors + first, next_lane]
        modulus_sq = yr * yr + yi * yi
        if modulus_sq > largest:
            best, largest = k, modulus_sq
    return best


@kernel
def log_modulus_of_determinant(matrix: np.ndarray, n: int) -> float:
    """log |det| by Gaussian elimination with partial pivoting (Golub and Van Loan, Matrix Computations, section 3.4).

    Entries may be as large as exp(300) and as small as exp(-300); -inf for a singular matrix.

    Parameters
    ----------
    matrix : ndarray, shape (2 v n, 8)
        Layout of this module; destroyed.
    """
    n_vectors = matrix.shape[0] // (2 * n)
    width = 2 * n_vectors
    best, largest = 0, -1.0
    for k in range(n):
        modulus_sq = matrix[width * k, 0] ** 2 + matrix[width * k + n_vectors, 0] ** 2
        if modulus_sq > largest:
            best, largest = k, modulus_sq
    total, product = 0.0, 1.0
    for j in range(n):
        if best != j:
            _swap_matrix_rows(matrix, n_vectors, best, j)
        row = width * j + j // LANES
        pivot_r, pivot_i = matrix[row, j % LANES], matrix[row + n_vectors, j % LANES]
        modulus_sq = pivot_r * pivot_r + pivot_i * pivot_i
        if modulus_sq == 0.0:
            return -np.inf
        product *= modulus_sq
        if not (1.0 / _LARGEST_PRODUCT < product < _LARGEST_PRODUCT):
            total += math.log(product)
            product = 1.0
        if j + 1 < n:
            best = _eliminate(matrix, n, n_vectors, j, pivot_r, pivot_i)
    return 0.5 * (total + math.log(product))
