"""Metropolis moves of the Moore-Read state on the torus, eight walkers at a time.

|Psi|^2 = |Pf[theta_a(v_ij)/theta_1(v_ij)]|^2 prod_{i<j} |s(z_ij)|^(2m) (Greiter, Wen and Wilczek, Nucl. Phys. B 374, 567 (1992), section
on the torus); see `mcgeo.kernels.moore_read_pairs` for the factors and `mcgeo.kernels.pfaffian` for the inverse matrix.

An electron is visited with several proposals in turn. All of them need the same column of the inverse, so the inverse is updated once per
visit, if any proposal was accepted. At the start of a visit the row at hand times that column must give one: what it differs
by is the error that the inverse has gathered, and the inverses are made anew before it matters.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.elementary import exponential, next_uniform
from mcgeo.kernels.lanes import (
    LANES,
    float_from_integer,
    load,
    round_to_integer,
    select,
    splat,
    splat_bits,
    store,
)
from mcgeo.kernels.laughlin_torus import _phase
from mcgeo.kernels.moore_read_pairs import pair_row, store_phase
from mcgeo.kernels.pfaffian import aligned_zeros, exchange_row, invert, scale_both

# Squared residual at which the inverses are made anew.
_LARGEST_RESIDUAL_SQ = 1e-22


class MooreReadStorage(NamedTuple):
    """What a group keeps between moves, and scratch; made by `moore_read_storage`.

    Attributes
    ----------
    phases : ndarray, shape (4 n_electrons, 8)
        w and 1/w of every electron, walkers along the last axis.
    inverses : ndarray, shape (8, 2, n_electrons * n_blocks, 8)
        Real and imaginary part of the inverse Pfaffian matrix of each walker.
    lanes : ndarray, shape (4, 8)
        Sum of b; which walkers moved; largest squared residual since the last refresh; log |det| at the last refresh.
    column, row, trial : ndarray, shape (2 n_electrons, 8)
        Column of the inverses and rows of the matrices for the electron visited.
    vectors : ndarray, shape (6, n_blocks, 8)
        One walker's row and scratch of `exchange_row`.
    """

    phases: np.ndarray
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
        aligned_zeros((4 * n_electrons, LANES)),
        aligned_zeros((LANES, 2, n_electrons * n_blocks, LANES)),
        aligned_zeros((4, LANES)),
        aligned_zeros((2 * n_electrons, LANES)),
        aligned_zeros((2 * n_electrons, LANES)),
        aligned_zeros((2 * n_electrons, LANES)),
        aligned_zeros((6, n_blocks, LANES)),
    )


@kernel
def _fill_matrices(tables: Any, storage: Any, n: int, log_near: np.ndarray) -> None:
    """Pfaffian matrices from the phases, and the logarithm of the Jastrow product of all pairs."""
    n_blocks = storage.vectors.shape[1]
    storage.inverses[:] = 0.0
    log_near[:] = 0.0
    for i in range(1, n):
        wr, wi = load(storage.phases, 4 * i), load(storage.phases, 4 * i + 1)
        _, _, near, power = pair_row(tables, storage.phases, i, i, wr, wi, storage.column, storage.row)
        store(storage.trial, 0, near)
        store(storage.trial, 1, float_from_integer(power))
        for lane in range(LANES):
            log_near[0, lane] += math.log(storage.trial[0, lane]) + storage.trial[1, lane] * math.log(2.0)
            for part in range(2):
                for j in range(i):
                    entry = storage.row[2 * j + part, lane]
                    storage.inverses[lane, part, i * n_blocks + j // LANES, j % LANES] = entry
                    storage.inverses[lane, part, j * n_blocks + i // LANES, i % LANES] = -entry


@kernel
def _scaled_inverses(tables: Any, storage: Any, n: int) -> None:
    """Matrices to inverses, rows and columns brought to like size by the factors sqrt|w| that were left out of them."""
    log_scale = np.zeros(n)
    for lane in range(LANES):
        real, imag = storage.inverses[lane, 0], storage.inverses[lane, 1]
        if tables.half_phases == 1:
            for j in range(n):
                wr, wi = storage.phases[4 * j, lane], storage.phases[4 * j + 1, lane]
                log_scale[j] = 0.25 * math.log(wr * wr + wi * wi)
        scale_both(real, imag, np.exp(log_scale))
        log_determinant = invert(real, imag, n)
        scale_both(real, imag, np.exp(log_scale))
        storage.lanes[3, lane] = log_determinant - 2.0 * log_scale.sum()


@kernel
def refresh(tables: Any, a: np.ndarray, b: np.ndarray, storage: Any, log_near: np.ndarray) -> None:
    """Phases, sums and inverses from the positions.

    Parameters
    ----------
    a, b : ndarray, shape (n_electrons, 8)
        Positions in units of the cell's vectors, in [-1/2, 1/2].
    storage : MooreReadStorage
        Written.
    log_near : ndarray, shape (1, 8)
        Written: sum over pairs of log |(w_i - w_j) D(c_ij)|^2.
    """
    n = a.shape[0]
    sum_b = splat(0.0)
    for j in range(n):
        wr, wi = _phase(tables, load(a, j), load(b, j))
        store_phase(storage.phases, j, wr, wi)
        sum_b = sum_b + load(b, j)
    store(storage.lanes, 0, sum_b)
    store(storage.lanes, 2, splat(0.0))
    _fill_matrices(tables, storage, n, log_near)
    _scaled_inverses(tables, storage, n)


@kernel
def _gather_column(storage: Any, n: int, i: int) -> None:
    """Column i of the inverses, walkers side by side: minus row i."""
    n_blocks = storage.vectors.shape[1]
    for lane in range(LANES):
        real, imag = storage.inverses[lane, 0], storage.inverses[lane, 1]
        for j in range(n):
            place = i * n_blocks + (j >> 3)
            storage.column[2 * j, lane] = -real[place, j & 7]
            storage.column[2 * j + 1, lane] = -imag[place, j & 7]


@kernel
def _exchange_rows(storage: Any, n: int, i: int) -> None:
    """Update the inverses of the walkers that moved, for row i as it stands in ``row``."""
    vector_real, vector_imag = storage.vectors[0], storage.vectors[1]
    for lane in range(LANES):
        if storage.lanes[1, lane] == 0.0:
            continue
        for j in range(n):
            vector_real[j >> 3, j & 7] = storage.row[2 * j, lane]
            vector_imag[j >> 3, j & 7] = storage.row[2 * j + 1, lane]
        exchange_row(
            storage.inverses[lane, 0], storage.inverses[lane, 1], n, i, storage.vectors[:2], storage.vectors[2:]
        )


@kernel
def _one_body_part(tables: Any, n_others: int, sum_b: Any, b: Any) -> Any:
    """log |Psi|^2 of one electron but the near product and |Pf|^2; ``sum_b`` is the sum of b over the others."""
    quadratic = (b * (1.0 * n_others) - b * b * (1.0 * n_others) + b * sum_b * 2.0) * (1.0 * tables.exponent)
    return (quadratic - b * (1.0 * tables.half_phases)) * (2.0 * math.pi * tables.tau_imag)


@kernel
def _current_row(tables: Any, a: np.ndarray, b: np.ndarray, storage: Any, i: int) -> Any:
    """Row and products of electron i where it is; the inverses are made anew if they have lost precision."""
    n = a.shape[0]
    wr, wi = load(storage.phases, 4 * i), load(storage.phases, 4 * i + 1)
    _gather_column(storage, n, i)
    rr, ri, near, power = pair_row(tables, storage.phases, i, n, wr, wi, storage.column, storage.row)
    residual = (rr - 1.0) * (rr - 1.0) + ri * ri
    largest = load(storage.lanes, 2)
    store(storage.lanes, 2, select(residual > largest, residual, largest))
    lost = False
    for lane in range(LANES):
        lost |= storage.lanes[2, lane] > _LARGEST_RESIDUAL_SQ
    if lost:
        refresh(tables, a, b, storage, np.empty((1, LANES)))
        _gather_column(storage, n, i)
        rr, ri, near, power = pair_row(tables, storage.phases, i, n, wr, wi, storage.column, storage.row)
    for part in range(2):
        store(storage.row, 2 * i + part, splat(0.0))
    return rr, ri, near, power


@kernel
def _visit(
    tables: Any, a: np.ndarray, b: np.ndarray, storage: Any, words: np.ndarray, i: int, step: float, n_hits: int
) -> Any:
    """``n_hits`` proposals for electron i; returns the number accepted."""
    n = a.shape[0]
    m = 1.0 * tables.exponent
    to_a, to_b = step / tables.side, step / (tables.side * tables.tau_imag)
    s0, s1, s2, s3 = load(words, 0), load(words, 1), load(words, 2), load(words, 3)
    rr, ri, near, power = _current_row(tables, a, b, storage, i)
    xa, xb = load(a, i), load(b, i)
    wr, wi = load(storage.phases, 4 * i), load(storage.phases, 4 * i + 1)
    sum_b = load(storage.lanes, 0) - xb
    rest = _one_body_part(tables, n - 1, sum_b, xb)
    n_accepted = splat(0.0)
    for _ in range(n_hits):
        ux, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
        uy, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
        u, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
        shift_b = (uy - 0.5) * to_b
        new_b = xb + shift_b
        new_a = xa + (ux - 0.5) * to_a - shift_b * tables.tau_real
        new_b = new_b - round_to_integer(new_b)
        new_a = new_a - round_to_integer(new_a)
        new_wr, new_wi = _phase(tables, new_a, new_b)
        new_rr, new_ri, new_near, new_power = pair_row(
            tables, storage.phases, i, n, new_wr, new_wi, storage.column, storage.trial
        )
        new_rest = _one_body_part(tables, n - 1, sum_b, new_b)
        gain = float_from_integer(new_power - power) * (math.log(2.0) * m) + (new_rest - rest)
        left = u * (rr * rr + ri * ri)
        right = exponential(gain) * (new_rr * new_rr + new_ri * new_ri)
        for _factor in range(tables.exponent):
            left = left * near
            right = right * new_near
        accept = left < right
        xa, xb = select(accept, new_a, xa), select(accept, new_b, xb)
        wr, wi = select(accept, new_wr, wr), select(accept, new_wi, wi)
        rr, ri = select(accept, new_rr, rr), select(accept, new_ri, ri)
        near, rest = select(accept, new_near, near), select(accept, new_rest, rest)
        power = select(accept, new_power, power)
        n_accepted = n_accepted + select(accept, splat(1.0), splat(0.0))
        for j in range(2 * n):
            store(storage.row, j, select(accept, load(storage.trial, j), load(storage.row, j)))
    store(a, i, xa)
    store(b, i, xb)
    store_phase(storage.phases, i, wr, wi)
    store(storage.lanes, 0, sum_b + xb)
    store(storage.lanes, 1, n_accepted)
    for word, value in enumerate((s0, s1, s2, s3)):
        store(words, word, value)
    _exchange_rows(storage, n, i)
    return n_accepted


@kernel
def advance(
    tables: Any,
    a: np.ndarray,
    b: np.ndarray,
    storage: Any,
    words: np.ndarray,
    accepted: np.ndarray,
    step: float,
    n_sweeps: int,
    n_hits: int,
) -> None:
    """``n_sweeps`` sweeps of a group of eight walkers: every electron gets ``n_hits`` proposals in turn per sweep.

    Parameters
    ----------
    a, b, storage
        As in `refresh`; updated.
    words : ndarray of uint64, shape (4, 8)
        The lanes' generators; updated.
    accepted : ndarray, shape (1, 8)
        Incremented by the number of accepted proposals.
    step : float
        Side of the square proposal in l_B.
    """
    for _ in range(n_sweeps):
        for i in range(a.shape[0]):
            store(accepted, 0, load(accepted, 0) + _visit(tables, a, b, storage, words, i, step, n_hits))


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
    log_near = np.empty((1, LANES))
    refresh(tables, a, b, storage, log_near)
    for lane in range(LANES):
        sum_b, sum_b_sq = 0.0, 0.0
        for j in range(n):
            sum_b += b[j, lane]
            sum_b_sq += b[j, lane] ** 2
        # Sum over pairs of (b_i + b_j) - (b_i - b_j)^2.
        pairs = (n - 1) * sum_b - n * sum_b_sq + sum_b**2
        one_body = 2.0 * math.pi * tables.tau_imag * (tables.exponent * pairs - tables.half_phases * sum_b)
        out[lane] = tables.exponent * log_near[0, lane] + storage.lanes[3, lane] + one_body
