"""Density waves rho_q = sum_j exp(-i q.r_j) of eight walkers at all wavevectors of a half-plane.

In units of the cell, q.r = 2 pi (n1 a + n2 b). For each n1 the integer c nearest to n1 Re(tau) is split off,
q.r = 2 pi [(n1 a + c b) + k b] with k = n2 - c, so that the disk |q| < q_max is nearly symmetric in k for every cell.
The products of cosines and sines of the two parts are summed once and serve +k and -k together.

Four rows n1 are summed at once: sixteen sums stay in registers while ten numbers per electron are loaded, of which two
come from the table of powers, which is too large for the first cache. Powers and rows advance by multiplication;
electrons are taken in blocks.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from mcgeo.kernels._jit import inlined_kernel, lean_kernel
from mcgeo.kernels.elementary import cosine_sine_of_turns
from mcgeo.kernels.lanes import LANES, aligned_zeros, load, splat, store

# Electrons in a block and numbers in its table of powers, each of eight lanes: four rows n1 and one value of k fit the
# first cache, the table fits the second.
_LARGEST_BLOCK = 64
_LARGEST_TABLE = 18_000
# Rows n1 that are summed together.
_ROWS = 4


class WaveTables(NamedTuple):
    """Which waves are wanted.

    Attributes
    ----------
    offset : ndarray of int64, shape (n_rows,)
        c for n1 = 0 .. n_rows - 1; n_rows is a multiple of four.
    reach : ndarray of int64, shape (n_rows,)
        Number of values of |k| visited in the row: |k| = 0, 1, ...
    plus, minus : ndarray of int64, shape (n_rows, largest reach)
        Place of the wave +k (-k) in the output, or -1 where it is not wanted.
    """

    offset: np.ndarray
    reach: np.ndarray
    plus: np.ndarray
    minus: np.ndarray


def wave_tables(waves: np.ndarray, tau_real: float) -> WaveTables:
    """Tables for the integer pairs (n1 >= 0, n2) of ``waves``, shape (n_waves, 2)."""
    n_rows = _ROWS * (int(waves[:, 0].max()) // _ROWS + 1)
    offset = np.rint(np.arange(n_rows) * tau_real).astype(np.int64)
    k = waves[:, 1] - offset[waves[:, 0]]
    reach = np.zeros(n_rows, dtype=np.int64)
    np.maximum.at(reach, waves[:, 0], np.abs(k) + 1)
    plus = np.full((n_rows, int(reach.max())), -1, dtype=np.int64)
    minus = plus.copy()
    place = np.arange(len(waves))
    positive = k >= 0
    plus[waves[positive, 0], k[positive]] = place[positive]
    minus[waves[~positive, 0], -k[~positive]] = place[~positive]
    return WaveTables(offset, reach, plus, minus)


class WaveSums(NamedTuple):
    """Accumulators of eight walkers.

    Attributes
    ----------
    total : ndarray, shape (n_waves, 8)
        Sum of |rho_q|^2.
    scalar : ndarray, shape (1, 8)
        Sum over the waves of ``weights`` |rho_q|^2.
    weights : ndarray, shape (n_waves,)
    powers : ndarray
        Scratch: powers of exp(2 pi i b) of one block of electrons.
    rows : ndarray
        Scratch: exp(2 pi i (n1 a + c b)) of a block for four n1 side by side; the latest n1 and its step.
    partial : ndarray
        Scratch: the sums over earlier blocks.
    """

    total: np.ndarray
    scalar: np.ndarray
    weights: np.ndarray
    powers: np.ndarray
    rows: np.ndarray
    partial: np.ndarray


def wave_sums(tables: WaveTables, weights: np.ndarray, n_electrons: int) -> WaveSums:
    """Empty accumulators; ``weights`` of shape (n_waves,) belong to the scalar."""
    n_rows, largest = len(tables.reach), int(tables.reach.max())
    n_powers = max(2, largest)
    most = max(1, min(_LARGEST_BLOCK, _LARGEST_TABLE // (2 * n_powers)))
    # Blocks as even as can be.
    n_blocks = -(-n_electrons // most)
    block = -(-n_electrons // n_blocks)
    n_partial = 4 * n_rows * largest if block < n_electrons else 0
    return WaveSums(
        aligned_zeros((len(weights), LANES)),
        aligned_zeros((1, LANES)),
        np.asarray(weights, dtype=float),
        aligned_zeros((2 * n_powers * block, LANES)),
        aligned_zeros((2 * (_ROWS + 2) * block, LANES)),
        aligned_zeros((n_partial, LANES)),
    )


@lean_kernel
def _fill_powers(b: np.ndarray, start: int, n: int, n_powers: int, powers: np.ndarray) -> None:
    """exp(2 pi i k b), k = 0 .. n_powers - 1, of electrons start .. start + n - 1 in rows 2 (k n + j) and the next."""
    for j in range(n):
        c, s = cosine_sine_of_turns(load(b, start + j))
        store(powers, 2 * j, splat(1.0))
        store(powers, 2 * j + 1, splat(0.0))
        store(powers, 2 * (n + j), c)
        store(powers, 2 * (n + j) + 1, s)
    # Electrons are the inner loop: a chain of products of one electron would wait for every one of them.
    for k in range(2, n_powers):
        for j in range(n):
            c, s = load(powers, 2 * ((k - 1) * n + j)), load(powers, 2 * ((k - 1) * n + j) + 1)
            x, y = load(powers, 2 * (n + j)), load(powers, 2 * (n + j) + 1)
            store(powers, 2 * (k * n + j), c * x - s * y)
            store(powers, 2 * (k * n + j) + 1, c * y + s * x)


@inlined_kernel
def _add_square(waves: Any, place: int, real: Any, imag: Any) -> Any:
    """Add a square to its wave and return it with its weight."""
    if place < 0:
        return splat(0.0)
    square = real * real + imag * imag
    store(waves.total, place, load(waves.total, place) + square)
    return square * waves.weights[place]


@inlined_kernel
def _keep_or_square(
    tables: Any, waves: Any, n1: int, k: int, earlier: bool, last: bool, cc: Any, ss: Any, cs: Any, sc: Any
) -> Any:
    """Keep the sums for the next block, or square them into the waves and return the squares with their weights."""
    if k >= tables.reach[n1]:
        return splat(0.0)
    place = 4 * (n1 * tables.plus.shape[1] + k)
    partial = waves.partial
    if earlier:
        cc, ss = cc + load(partial, place), ss + load(partial, place + 1)
        cs, sc = cs + load(partial, place + 2), sc + load(partial, place + 3)
    if not last:
        store(partial, place, cc)
        store(partial, place + 1, ss)
        store(partial, place + 2, cs)
        store(partial, place + 3, sc)
        return splat(0.0)
    plus = _add_square(waves, tables.plus[n1, k], cc - ss, sc + cs)
    return plus + _add_square(waves, tables.minus[n1, k], cc + ss, sc - cs)


@lean_kernel
def _sum_rows(tables: Any, waves: Any, n: int, n1: int, earlier: bool, last: bool) -> None:
    """Sums of one block for the rows n1 to n1 + 3 and all their |k|."""
    rows, powers = waves.rows, waves.powers
    reach = max(max(tables.reach[n1], tables.reach[n1 + 1]), max(tables.reach[n1 + 2], tables.reach[n1 + 3]))
    total = load(waves.scalar, 0)
    for k in range(reach):
        acc, ass, acs, asc = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
        bcc, bss, bcs, bsc = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
        dcc, dss, dcs, dsc = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
        ecc, ess, ecs, esc = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
        for j in range(n):
            x, y = load(powers, 2 * (k * n + j)), load(powers, 2 * (k * n + j) + 1)
            c, s = load(rows, 8 * j), load(rows, 8 * j + 1)
            acc, ass, acs, asc = acc + c * x, ass + s * y, acs + c * y, asc + s * x
            c, s = load(rows, 8 * j + 2), load(rows, 8 * j + 3)
            bcc, bss, bcs, bsc = bcc + c * x, bss + s * y, bcs + c * y, bsc + s * x
            c, s = load(rows, 8 * j + 4), load(rows, 8 * j + 5)
            dcc, dss, dcs, dsc = dcc + c * x, dss + s * y, dcs + c * y, dsc + s * x
            c, s = load(rows, 8 * j + 6), load(rows, 8 * j + 7)
            ecc, ess, ecs, esc = ecc + c * x, ess + s * y, ecs + c * y, esc + s * x
        total = total + _keep_or_square(tables, waves, n1, k, earlier, last, acc, ass, acs, asc)
        total = total + _keep_or_square(tables, waves, n1 + 1, k, earlier, last, bcc, bss, bcs, bsc)
        total = total + _keep_or_square(tables, waves, n1 + 2, k, earlier, last, dcc, dss, dcs, dsc)
        total = total + _keep_or_square(tables, waves, n1 + 3, k, earlier, last, ecc, ess, ecs, esc)
    store(waves.scalar, 0, total)


@lean_kernel
def _start_row(a: np.ndarray, start: int, n: int, rows: np.ndarray) -> None:
    """Behind the four rows: the latest, n1 = 0, and its step exp(2 pi i a)."""
    for j in range(n):
        c, s = cosine_sine_of_turns(load(a, start + j))
        at = 2 * _ROWS * n + 4 * j
        store(rows, at, splat(1.0))
        store(rows, at + 1, splat(0.0))
        store(rows, at + 2, c)
        store(rows, at + 3, s)


@lean_kernel
def _put_row(n: int, slot: int, turn: int, powers: np.ndarray, rows: np.ndarray) -> None:
    """Put the latest row into its slot and go on to n1 + 1, c changing by ``turn``."""
    sign = 1.0 if turn > 0 else -1.0
    for j in range(n):
        at = 2 * _ROWS * n + 4 * j
        c, s = load(rows, at), load(rows, at + 1)
        store(rows, 2 * (_ROWS * j + slot), c)
        store(rows, 2 * (_ROWS * j + slot) + 1, s)
        x, y = load(rows, at + 2), load(rows, at + 3)
        c, s = c * x - s * y, c * y + s * x
        x, y = load(powers, 2 * (n + j)), load(powers, 2 * (n + j) + 1) * sign
        for _ in range(abs(turn)):
            c, s = c * x - s * y, c * y + s * x
        store(rows, at, c)
        store(rows, at + 1, s)


@lean_kernel
def add_structure_factor(tables: Any, a: np.ndarray, b: np.ndarray, waves: Any) -> None:
    """Add |rho_q|^2 of the present configuration to ``waves.total``, and its weighted sum to ``waves.scalar``.

    Parameters
    ----------
    tables : WaveTables
    a, b : ndarray, shape (n_electrons, 8)
        Positions in units of the cell's vectors.
    waves : WaveSums
        Updated.
    """
    n_electrons = a.shape[0]
    n_rows, n_powers = tables.reach.shape[0], max(2, tables.plus.shape[1])
    block = waves.powers.shape[0] // (2 * n_powers)
    for start in range(0, n_electrons, block):
        n = min(block, n_electrons - start)
        earlier, last = start > 0, start + n == n_electrons
        _fill_powers(b, start, n, n_powers, waves.powers)
        _start_row(a, start, n, waves.rows)
        for n1 in range(n_rows):
            turn = tables.offset[n1 + 1] - tables.offset[n1] if n1 + 1 < n_rows else 0
            _put_row(n, n1 % _ROWS, turn, waves.powers, waves.rows)
            if n1 % _ROWS == _ROWS - 1:
                _sum_rows(tables, waves, n, n1 - _ROWS + 1, earlier, last)
