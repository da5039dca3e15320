"""Metropolis moves of the Moore-Read state on the torus, eight walkers at a time.

|Psi|^2 = |Pf[theta_a(v_ij)/theta_1(v_ij)]|^2 prod_{i<j} |s(z_ij)|^(2m) (Greiter, Wen and Wilczek, Nucl. Phys. B 374,
567 (1992)); see `moore_read_pairs` for the factors and `pfaffian` for the inverse matrix.

An electron is visited with several proposals in turn. All of them need the same column of the inverse, so the
inverse is updated once per visit, if any proposal was accepted. At the start of a visit the row of the matrix times
that column must give one: what it differs by is the error that the inverse has gathered, and the inverse is made
anew before it matters.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.elementary import exponential, next_uniform
from mcgeo.kernels.lanes import LANES, float_from_integer, load, round_to_integer, select, splat, store
from mcgeo.kernels.moore_read_inverses import LOST, MOVED, RESIDUAL_SQ, SUM_B, make_lost_inverses
from mcgeo.kernels.moore_read_pairs import load_factors, pair_row, position_factors, store_factors
from mcgeo.kernels.pfaffian import exchange_row

# Squared residual at which an inverse is made anew. The error of an inverse, in units of its largest entry, stays
# within a few times the residual; both were found below 2e-11 after 1e5 moves, N = 20 to 100, Im(tau) up to 20.
_LARGEST_RESIDUAL_SQ = 1e-20


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
        if storage.lanes[MOVED, lane] == 0.0:
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
    quadratic = b * (1.0 * n_others) - b * b * (1.0 * n_others) + b * sum_b * 2.0
    return quadratic * (2.0 * math.pi * tables.tau_imag * tables.exponent)


@kernel
def _current_row(tables: Any, storage: Any, n: int, i: int) -> Any:
    """Row and products of electron i where it is; inverses that have lost precision are made anew."""
    wr, wi, scale = load_factors(storage.factors, i)
    _gather_column(storage, n, i)
    rr, ri, near, power = pair_row(
        tables, storage.factors, i, n, wr, wi, scale, storage.column, storage.row
    )  # fmt: skip
    residual = (rr - 1.0) * (rr - 1.0) + ri * ri
    largest = load(storage.lanes, RESIDUAL_SQ)
    store(storage.lanes, RESIDUAL_SQ, select(residual > largest, residual, largest))
    # Written so that an inverse spoilt by NaN is lost too.
    store(storage.lanes, LOST, select(residual < splat(_LARGEST_RESIDUAL_SQ), splat(0.0), splat(1.0)))
    if np.any(storage.lanes[LOST] > 0.0):
        make_lost_inverses(tables, storage, n)
        _gather_column(storage, n, i)
        rr, ri, near, power = pair_row(
            tables, storage.factors, i, n, wr, wi, scale, storage.column, storage.row
        )  # fmt: skip
    for part in range(2):
        store(storage.row, 2 * i + part, splat(0.0))
    return rr, ri, near, power


@kernel
def _shifted(tables: Any, a: Any, b: Any, dx: Any, dy: Any) -> Any:
    """Position (a, b) shifted by (dx, dy) in l_B and wrapped into the cell."""
    shift_b = dy * (1.0 / (tables.side * tables.tau_imag))
    new_a = a + dx * (1.0 / tables.side) - shift_b * tables.tau_real
    new_b = b + shift_b
    return new_a - round_to_integer(new_a), new_b - round_to_integer(new_b)


@kernel
def _visit(
    tables: Any, a: np.ndarray, b: np.ndarray, storage: Any, words: np.ndarray, i: int, step: float, n_hits: int
) -> Any:
    """``n_hits`` proposals for electron i; returns the number accepted."""
    n = a.shape[0]
    m = 1.0 * tables.exponent
    s0, s1, s2, s3 = load(words, 0), load(words, 1), load(words, 2), load(words, 3)
    rr, ri, near, power = _current_row(tables, storage, n, i)
    xa, xb = load(a, i), load(b, i)
    wr, wi, scale = load_factors(storage.factors, i)
    sum_b = load(storage.lanes, SUM_B) - xb
    rest = _one_body_part(tables, n - 1, sum_b, xb)
    n_accepted = splat(0.0)
    for _ in range(n_hits):
        ux, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
        uy, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
        u, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
        new_a, new_b = _shifted(tables, xa, xb, (ux - 0.5) * step, (uy - 0.5) * step)
        new_wr, new_wi, new_scale = position_factors(tables, new_a, new_b)
        new_rr, new_ri, new_near, new_power = pair_row(
            tables, storage.factors, i, n, new_wr, new_wi, new_scale, storage.column, storage.trial
        )  # fmt: skip
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
        near, power = select(accept, new_near, near), select(accept, new_power, power)
        rest, scale = select(accept, new_rest, rest), select(accept, new_scale, scale)
        n_accepted = n_accepted + select(accept, splat(1.0), splat(0.0))
        for j in range(2 * n):
            store(storage.row, j, select(accept, load(storage.trial, j), load(storage.row, j)))
    store(a, i, xa)
    store(b, i, xb)
    store_factors(storage.factors, i, wr, wi, scale)
    store(storage.lanes, SUM_B, sum_b + xb)
    store(storage.lanes, MOVED, n_accepted)
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
