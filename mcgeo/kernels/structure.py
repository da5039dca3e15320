"""Density waves rho_q = sum_j exp(-i q.r_j) of eight walkers at all wavevectors of a half-plane.

In units of the cell, q.r = 2 pi (n1 a + n2 b). For each n1 the half-integer c nearest to n1 Re(tau) is split off,
q.r = 2 pi [(n1 a + c b) + k b] with k = n2 - c, so that the disk |q| < q_max is nearly symmetric in k for every cell.
The products of cosines and sines of the two parts are summed once and serve +k and -k together.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.elementary import cosine_sine_of_turns
from mcgeo.kernels.lanes import LANES, load, splat, store


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
    work : ndarray
        Scratch: powers of exp(i pi b) and one row of exp(2 pi i (n1 a + c b)).
    """

    total: np.ndarray
    scalar: np.ndarray
    weights: np.ndarray
    work: np.ndarray


def wave_sums(tables: WaveTables, weights: np.ndarray, n_electrons: int) -> WaveSums:
    """Empty accumulators; ``weights`` of shape (n_waves,) belong to the scalar."""
    n_powers = 2 * int(tables.reach.max()) + 1
    return WaveSums(
        np.zeros((len(weights), LANES)),
        np.zeros((1, LANES)),
        np.ascontiguousarray(weights, dtype=float),
        np.empty(((n_powers + 1) * n_electrons * 2, LANES)),
    )


@kernel
def _fill_powers(b: np.ndarray, n_powers: int, work: np.ndarray) -> None:
    """cos and sin of pi k b for k = 0 .. n_powers - 1, row 2 (k n + j) and the next."""
    n = b.shape[0]
    for j in range(n):
        step_r, step_i = cosine_sine_of_turns(load(b, j) * 0.5)
        c, s = splat(1.0), splat(0.0)
        for k in range(n_powers):
            store(work, 2 * (k * n + j), c)
            store(work, 2 * (k * n + j) + 1, s)
            c, s = c * step_r - s * step_i, c * step_i + s * step_r


@kernel
def _add_square(waves: Any, place: int, real: Any, imag: Any) -> None:
    if place >= 0:
        square = real * real + imag * imag
        store(waves.total, place, load(waves.total, place) + square)
        store(waves.scalar, 0, load(waves.scalar, 0) + square * waves.weights[place])


@kernel
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
    n = a.shape[0]
    work = waves.work
    n_powers = work.shape[0] // (2 * n) - 1
    row = 2 * n_powers * n
    _fill_powers(b, n_powers, work)
    for n1 in range(tables.reach.shape[0]):
        for j in range(n):
            c, s = cosine_sine_of_turns(load(a, j) * (1.0 * n1) + load(b, j) * (0.5 * tables.offset[n1]))
            store(work, row + 2 * j, c)
            store(work, row + 2 * j + 1, s)
        parity = tables.offset[n1] & 1
        for k in range(0, tables.reach[n1], 2):
            # Two values of |k| at once: the row is loaded once for both. A padded last one is summed and not kept.
            first = 2 * n * (2 * k + parity)
            second = 2 * n * min(2 * k + 2 + parity, n_powers - 1)
            cc, ss, cs, sc = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
            dd, tt, dt, td = splat(0.0), splat(0.0), splat(0.0), splat(0.0)
            for j in range(n):
                c, s = load(work, row + 2 * j), load(work, row + 2 * j + 1)
                x, y = load(work, first + 2 * j), load(work, first + 2 * j + 1)
                cc, ss, cs, sc = cc + c * x, ss + s * y, cs + c * y, sc + s * x
                x, y = load(work, second + 2 * j), load(work, second + 2 * j + 1)
                dd, tt, dt, td = dd + c * x, tt + s * y, dt + c * y, td + s * x
            _add_square(waves, tables.plus[n1, k], cc - ss, sc + cs)
            _add_square(waves, tables.minus[n1, k], cc + ss, sc - cs)
            if k + 1 < tables.reach[n1]:
                _add_square(waves, tables.plus[n1, k + 1], dd - tt, td + dt)
                _add_square(waves, tables.minus[n1, k + 1], dd + tt, td - dt)
