"""Density waves rho_q = sum_j exp(-i q.r_j) of eight walkers at all wavevectors of a half-plane.

In units of the cell, q.r = 2 pi (n1 a + n2 b). For each n1 the half-integer c nearest to n1 Re(tau) is split off,
q.r = 2 pi [(n1 a + c b) + k b] with k = n2 - c, so that the disk |q| < q_max is nearly symmetric in k for every cell.
The products of cosines and sines of the two parts are summed once and serve +k and -k together.

Two rows n1 whose 2c have one parity and two values of k are summed at once: sixteen sums stay in registers while eight
numbers per electron are loaded. Powers and rows advance by multiplication; electrons are taken in blocks.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from mcgeo.kernels._jit import inlined_kernel, lean_kernel
from mcgeo.kernels.elementary import cosine_sine_of_turns
from mcgeo.kernels.lanes import LANES, aligned_zeros, load, splat, store

# Electrons in a block and numbers in its table of powers, each of eight lanes: two rows n1 and two values of k fit the
# first cache, the table fits the second.
_LARGEST_BLOCK = 100
_LARGEST_TABLE = 18_000


class WaveTables(NamedTuple):
    """Which waves are wanted.

    Attributes
    ----------
    offset : ndarray of int64, shape (n_rows,)
        2c for n1 = 0 .. n_rows - 1.
    reach : ndarray of int64, shape (n_rows,)
        Number of values of |k| visited in the row: |k| = 0, 1, ... or 1/2, 3/2, ...
    plus, minus : ndarray of int64, shape (n_rows, largest reach)
        Place of the wave +k (-k) in the output, or -1 where it is not wanted.
    """

    offset: np.ndarray
    reach: np.ndarray
    plus: np.ndarray
    minus: np.ndarray


def wave_tables(waves: np.ndarray, tau_real: float) -> WaveTables:
    """Tables for the integer pairs (n1 >= 0, n2) of ``waves``, shape (n_waves, 2)."""
    n_rows = int(waves[:, 0].max()) + 1
    offset = np.rint(2.0 * np.arange(n_rows) * tau_real).astype(np.int64)
    twice_k = 2 * waves[:, 1] - offset[waves[:, 0]]
    step = np.abs(twice_k) // 2
    reach = np.zeros(n_rows, dtype=np.int64)
    np.maximum.at(reach, waves[:, 0], step + 1)
    plus = np.full((n_rows, int(reach.max())), -1, dtype=np.int64)
    minus = plus.copy()
    place = np.arange(len(waves))
    positive = twice_k >= 0
    plus[waves[positive, 0], step[positive]] = place[positive]
    minus[waves[~positive, 0], step[~positive]] = place[~positive]
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
        Scratch: powers of exp(i pi b) of one block of electrons.
    rows : ndarray
        Scratch: exp(2 pi i (n1 a + c b)) of a block; one n1 that moves on, its step, two that wait per parity of 2c.
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
    n_powers = 2 * largest + 2
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
        aligned_zeros((2 * 6 * block, LANES)),
        aligned_zeros((n_partial, LANES)),
    )


@lean_kernel
def _fill_powers(b: np.ndarray, start: int, n: int, n_powers: int, powers: np.ndarray) -> None:
    """exp(i pi k b), k = 0 .. n_powers - 1, of electrons start .. start + n - 1 in rows 2 (k n + j) and the next."""
    for j in range(n):
        c, s = cosine_sine_of_turns(load(b, start + j) * 0.5)
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
def _sum_tile(
    tables: Any, waves: Any, n: int, first: int, second: int, slot: int, k: int, earlier: bool, last: bool
) -> Any:
    """Sums of one block for n1 = ``first`` and ``second`` (none when negative), |k| number ``k`` and ``k`` + 1.

    They are kept for the next block, or squared into the waves after the last one; returned is the weighted sum of
    these squares.
    """
    parity = tables.offset[first] & 1
    at, bt = 2 * slot * n, 2 * (slot + 1) * n
    xt = 2 * n * (2 * k + parity)
    yt = xt + 4 * n
    axcc, axss, axcs, axsc = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
    aycc, ayss, aycs, aysc = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
    bxcc, bxss, bxcs, bxsc = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
    bycc, byss, bycs, bysc = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
    rows, powers = waves.rows, waves.powers
    for j in range(n):
        c, s = load(rows, at + 2 * j), load(rows, at + 2 * j + 1)
        d, t = load(rows, bt + 2 * j), load(rows, bt + 2 * j + 1)
        x, y = load(powers, xt + 2 * j), load(powers, xt + 2 * j + 1)
        axcc, axss, axcs, axsc = axcc + c * x, axss + s * y, axcs + c * y, axsc + s * x
        bxcc, bxss, bxcs, bxsc = bxcc + d * x, bxss + t * y, bxcs + d * y, bxsc + t * x
        x, y = load(powers, yt + 2 * j), load(powers, yt + 2 * j + 1)
        aycc, ayss, aycs, aysc = aycc + c * x, ayss + s * y, aycs + c * y, aysc + s * x
        bycc, byss, bycs, bysc = bycc + d * x, byss + t * y, bycs + d * y, bysc + t * x
    total = splat(0.0)
    total = total + _keep_or_square(tables, waves, first, k, earlier, last, axcc, axss, axcs, axsc)
    total = total + _keep_or_square(tables, waves, first, k + 1, earlier, last, aycc, ayss, aycs, aysc)
    if second >= 0:
        total = total + _keep_or_square(tables, waves, second, k, earlier, last, bxcc, bxss, bxcs, bxsc)
        total = total + _keep_or_square(tables, waves, second, k + 1, earlier, last, bycc, byss, bycs, bysc)
    return total


@inlined_kernel
def _keep_or_square(
    tables: Any, waves: Any, n1: int, k: int, earlier: bool, last: bool, cc: Any, ss: Any, cs: Any, sc: Any
) -> Any:
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
def _sum_rows(tables: Any, waves: Any, n: int, first: int, second: int, slot: int, earlier: bool, last: bool) -> None:
    """All |k| of one or two rows."""
    reach = tables.reach[first]
    if second >= 0:
        reach = max(reach, tables.reach[second])
    total = load(waves.scalar, 0)
    for k in range(0, reach, 2):
        total = total + _sum_tile(tables, waves, n, first, second, slot, k, earlier, last)
    store(waves.scalar, 0, total)


@lean_kernel
def _start_row(a: np.ndarray, start: int, n: int, rows: np.ndarray) -> None:
    """Slot 0: the row that moves on, at n1 = 0. Slot 1: its step exp(2 pi i a)."""
    for j in range(n):
        c, s = cosine_sine_of_turns(load(a, start + j))
        store(rows, 2 * j, splat(1.0))
        store(rows, 2 * j + 1, splat(0.0))
        store(rows, 2 * (n + j), c)
        store(rows, 2 * (n + j) + 1, s)


@lean_kernel
def _next_row(n: int, turn: int, powers: np.ndarray, rows: np.ndarray) -> None:
    """Slot 0 goes from n1 to n1 + 1, 2c changing by ``turn``."""
    sign = 1.0 if turn > 0 else -1.0
    for j in range(n):
        c, s = load(rows, 2 * j), load(rows, 2 * j + 1)
        x, y = load(rows, 2 * (n + j)), load(rows, 2 * (n + j) + 1)
        c, s = c * x - s * y, c * y + s * x
        x, y = load(powers, 2 * (n + j)), load(powers, 2 * (n + j) + 1) * sign
        for _ in range(abs(turn)):
            c, s = c * x - s * y, c * y + s * x
        store(rows, 2 * j, c)
        store(rows, 2 * j + 1, s)


@lean_kernel
def _row_arrived(
    tables: Any, waves: Any, n: int, n1: int, waiting: int, slot: int, earlier: bool, last: bool
) -> int:
    """Put the row beside the one of its parity that waits and sum both, or let it wait; returns the n1 that waits."""
    place = 2 * n * (slot if waiting < 0 else slot + 1)
    for j in range(2 * n):
        store(waves.rows, place + j, load(waves.rows, j))
    if waiting < 0:
        return n1
    _sum_rows(tables, waves, n, waiting, n1, slot, earlier, last)
    return -1


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
    n_rows, n_powers = tables.reach.shape[0], 2 * tables.plus.shape[1] + 2
    block = waves.powers.shape[0] // (2 * n_powers)
    for start in range(0, n_electrons, block):
        n = min(block, n_electrons - start)
        earlier, last = start > 0, start + n == n_electrons
        _fill_powers(b, start, n, n_powers, waves.powers)
        _start_row(a, start, n, waves.rows)
        even, odd = -1, -1
        for n1 in range(n_rows):
            if n1 > 0:
                _next_row(n, tables.offset[n1] - tables.offset[n1 - 1], waves.powers, waves.rows)
            if tables.offset[n1] & 1 == 0:
                even = _row_arrived(tables, waves, n, n1, even, 2, earlier, last)
            else:
                odd = _row_arrived(tables, waves, n, n1, odd, 4, earlier, last)
        if even >= 0:
            _sum_rows(tables, waves, n, even, -1, 2, earlier, last)
        if odd >= 0:
            _sum_rows(tables, waves, n, odd, -1, 4, earlier, last)
