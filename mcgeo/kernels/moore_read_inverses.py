"""What eight Moore-Read walkers on the torus keep between moves, and log |Psi|^2 from the positions alone."""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.lanes import LANES, aligned_zeros, float_from_integer, load, splat, store
from mcgeo.kernels.moore_read_pairs import load_factors, pair_row, position_factors, store_factors
from mcgeo.kernels.pfaffian import invert

# Rows of `MooreReadStorage.lanes`: sum of b; log of the product of |(w_i - w_j) D(c_ij)|^2 over pairs and log |det|,
# both at the last refresh; largest squared residual since the inverse was made; marks of walkers whose inverse is to
# be made anew and of those that moved.
SUM_B, LOG_NEAR, LOG_DETERMINANT, RESIDUAL_SQ, LOST, MOVED = range(6)


class MooreReadStorage(NamedTuple):
    """What a group keeps between moves, and scratch; made by `moore_read_storage`.

    Attributes
    ----------
    factors : ndarray, shape (5 n_electrons, 8)
        As written by `store_factors`, walkers along the last axis.
    inverses : ndarray, shape (8, 2, n_electrons * n_blocks, 8)
        Real and imaginary part of the inverse Pfaffian matrix of each walker.
    lanes : ndarray, shape (6, 8)
        One number per walker and row.
    column, row, trial : ndarray, shape (2 n_electrons, 8)
        Column of the inverses and rows of the matrices for the electron visited.
    vectors : ndarray, shape (6, n_blocks, 8)
        One walker's row and scratch of `exchange_row`.
    """

    factors: np.ndarray
    inverses: np.ndarray
    lanes: np.ndarray
    column: np.ndarray
    row: np.ndarray
    trial: np.ndarray
    vectors: np.ndarray


def moore_read_storage(n_electrons: int) -> MooreReadStorage:
    """Storage of a group; `refresh` fills it."""
    n_blocks = -(-n_electrons // LANES)
    return MooreReadStorage(
        aligned_zeros((5 * n_electrons, LANES)),
        aligned_zeros((LANES, 2, n_electrons * n_blocks, LANES)),
        aligned_zeros((6, LANES)),
        aligned_zeros((2 * n_electrons, LANES)),
        aligned_zeros((2 * n_electrons, LANES)),
        aligned_zeros((2 * n_electrons, LANES)),
        aligned_zeros((6, n_blocks, LANES)),
    )


@kernel
def _fill_matrices(tables: Any, storage: Any, n: int) -> None:
    """Pfaffian matrices of the walkers marked as lost, and the logarithm of the Jastrow product of every walker."""
    n_blocks = storage.vectors.shape[1]
    log_near = splat(0.0)
    for lane in range(LANES):
        if storage.lanes[LOST, lane] > 0.0:
            storage.inverses[lane] = 0.0
    for i in range(1, n):
        wr, wi, scale = load_factors(storage.factors, i)
        _, _, near, power = pair_row(
            tables, storage.factors, i, i, wr, wi, scale, storage.column, storage.row
        )  # fmt: skip
        store(storage.lanes, LOG_NEAR, near)
        for lane in range(LANES):
            storage.lanes[LOG_NEAR, lane] = math.log(storage.lanes[LOG_NEAR, lane])
        log_near = log_near + load(storage.lanes, LOG_NEAR) + float_from_integer(power) * math.log(2.0)
        for lane in range(LANES):
            if storage.lanes[LOST, lane] == 0.0:
                continue
            for part in range(2):
                for j in range(i):
                    entry = storage.row[2 * j + part, lane]
                    storage.inverses[lane, part, i * n_blocks + j // LANES, j % LANES] = entry
                    storage.inverses[lane, part, j * n_blocks + i // LANES, i % LANES] = -entry
    store(storage.lanes, LOG_NEAR, log_near)


@kernel
def make_lost_inverses(tables: Any, storage: Any, n: int) -> None:
    """Inverses of the walkers marked as lost, by elimination."""
    _fill_matrices(tables, storage, n)
    for lane in range(LANES):
        if storage.lanes[LOST, lane] > 0.0:
            log_determinant = invert(storage.inverses[lane, 0], storage.inverses[lane, 1], n)
            storage.lanes[LOG_DETERMINANT, lane] = log_determinant
            storage.lanes[RESIDUAL_SQ, lane] = 0.0


@kernel
def refresh(tables: Any, a: np.ndarray, b: np.ndarray, storage: Any) -> None:
    """Factors of single electrons, sums and inverses from the positions.

    Parameters
    ----------
    a, b : ndarray, shape (n_electrons, 8)
        Positions in units of the cell's vectors, in [-1/2, 1/2].
    storage : MooreReadStorage
        Written.
    """
    n = a.shape[0]
    sum_b = splat(0.0)
    for j in range(n):
        wr, wi, scale = position_factors(tables, load(a, j), load(b, j))
        store_factors(storage.factors, j, wr, wi, scale)
        sum_b = sum_b + load(b, j)
    store(storage.lanes, SUM_B, sum_b)
    store(storage.lanes, LOST, splat(1.0))
    make_lost_inverses(tables, storage, n)


@kernel
def log_weights(tables: Any, a: np.ndarray, b: np.ndarray, storage: Any, out: np.ndarray) -> None:
    """log |Psi|^2 of each walker, up to one constant of the cell, recomputed from the positions alone.

    Parameters
    ----------
    a, b : ndarray, shape (n_electrons, 8)
    storage : MooreReadStorage
        Scratch.
    out : ndarray, shape (8,)
        Written.
    """
    n = a.shape[0]
    refresh(tables, a, b, storage)
    for lane in range(LANES):
        sum_b, sum_b_sq = 0.0, 0.0
        for j in range(n):
            sum_b += b[j, lane]
            sum_b_sq += b[j, lane] ** 2
        # Sum over pairs of (b_i + b_j) - (b_i - b_j)^2.
        pairs = (n - 1) * sum_b - n * sum_b_sq + sum_b**2
        log_jastrow = storage.lanes[LOG_NEAR, lane] + 2.0 * math.pi * tables.tau_imag * pairs
        out[lane] = tables.exponent * log_jastrow + storage.lanes[LOG_DETERMINANT, lane]
