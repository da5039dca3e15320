"""Metropolis moves of the Moore-Read droplet in the plane, eight walkers at a time.

Psi = Pf(1/(z_i - z_j)) prod_{i<j} (z_i - z_j)^m exp(-sum_i |z_i|^2 / 4) (Moore and Read, Nucl. Phys. B 360, 362
(1991)). The product runs over eight walkers side by side as in `laughlin_disk`. The Pfaffian of a walker is kept as
the inverse of its matrix, whose rows run along the electrons in lanes; see `pfaffian`. All proposals for one electron
exchange the same row, so their ratios come from one inverse, which is updated once when the electron is left.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.lanes import LANES, load, select, splat, store
from mcgeo.kernels.laughlin_disk import accepts, distance_product, gaussian_ratio, propose, swap_rows
from mcgeo.kernels.pfaffian import exchange_row, invert

# Added to squared distances: makes 1/(z - z) zero and leaves every other value as it is.
_TINY = 1e-300


@kernel
def _reciprocals(along_x: np.ndarray, along_y: np.ndarray, k: int, px: float, py: float) -> Any:
    """1/(z - z_j) for the electrons of block k as (real, imaginary)."""
    dx, dy = splat(px) - load(along_x, k), splat(py) - load(along_y, k)
    scale = 1.0 / (dx * dx + dy * dy + _TINY)
    return dx * scale, dy * scale * (-1.0)


@kernel
def _ratio_sq(
    real: np.ndarray, imag: np.ndarray, i: int, along_x: np.ndarray, along_y: np.ndarray,
    px: float, py: float, work: np.ndarray,
) -> float:  # fmt: skip
    """|Pf A' / Pf A|^2 with electron i put at (px, py): |sum_j a'_j B_ij|^2."""
    n_blocks = along_x.shape[0]
    sum_r, sum_i = splat(0.0), splat(0.0)
    for k in range(n_blocks):
        ar, ai = _reciprocals(along_x, along_y, k, px, py)
        br, bi = load(real, i * n_blocks + k), load(imag, i * n_blocks + k)
        sum_r = sum_r + (ar * br - ai * bi)
        sum_i = sum_i + (ar * bi + ai * br)
    store(work, 0, sum_r)
    store(work, 1, sum_i)
    total_r, total_i = 0.0, 0.0
    for lane in range(LANES):
        total_r += work[0, lane]
        total_i += work[1, lane]
    return total_r * total_r + total_i * total_i


@kernel
def refresh_inverses(
    x: np.ndarray, y: np.ndarray, along_x: np.ndarray, along_y: np.ndarray, real: np.ndarray, imag: np.ndarray,
    log_determinants: np.ndarray,
) -> None:  # fmt: skip
    """All that is kept between moves, from the positions.

    Parameters
    ----------
    x, y : ndarray, shape (n_electrons, 8)
        Positions in l_B, walkers along the lanes.
    along_x, along_y : ndarray, shape (8, n_blocks, 8)
        Written: the same positions, for each walker along the electrons.
    real, imag : ndarray, shape (8, n_electrons * n_blocks, 8)
        Written: for each walker the inverse of A_ij = 1/(z_i - z_j).
    log_determinants : ndarray, shape (8,)
        Written: log |det A| = log |Pf A|^2.
    """
    n, n_blocks = x.shape[0], along_x.shape[1]
    for walker in range(LANES):
        for j in range(n):
            along_x[walker, j // LANES, j % LANES] = x[j, walker]
            along_y[walker, j // LANES, j % LANES] = y[j, walker]
        for i in range(n):
            for k in range(n_blocks):
                ar, ai = _reciprocals(along_x[walker], along_y[walker], k, x[i, walker], y[i, walker])
                store(real[walker], i * n_blocks + k, ar)
                store(imag[walker], i * n_blocks + k, ai)
            for j in range(n, n_blocks * LANES):
                real[walker, i * n_blocks + j // LANES, j % LANES] = 0.0
                imag[walker, i * n_blocks + j // LANES, j % LANES] = 0.0
        log_determinants[walker] = invert(real[walker], imag[walker], n)


@kernel
def _exchange_electron(
    n: int, i: int, px: float, py: float, along_x: np.ndarray, along_y: np.ndarray,
    real: np.ndarray, imag: np.ndarray, row: np.ndarray, work: np.ndarray,
) -> None:  # fmt: skip
    """Put electron i of one walker at (px, py) in all that is kept."""
    along_x[i // LANES, i % LANES], along_y[i // LANES, i % LANES] = px, py
    for k in range(along_x.shape[0]):
        ar, ai = _reciprocals(along_x, along_y, k, px, py)
        store(row[0], k, ar)
        store(row[1], k, ai)
    exchange_row(real, imag, n, i, row, work)


@kernel
def advance(
    exponent: int, x: np.ndarray, y: np.ndarray, along_x: np.ndarray, along_y: np.ndarray,
    real: np.ndarray, imag: np.ndarray, words: np.ndarray, accepted: np.ndarray,
    step: float, n_sweeps: int, n_hits: int,
) -> None:  # fmt: skip
    """``n_sweeps`` sweeps of a group of eight walkers: every electron gets ``n_hits`` proposals in turn per sweep.

    A proposal is uniform on a square of side ``step`` (l_B).

    Parameters
    ----------
    exponent : int
        m.
    x, y, along_x, along_y, real, imag
        As in `refresh_inverses`; updated.
    words : ndarray of uint64, shape (4, 8)
        The lanes' generators; updated.
    accepted : ndarray, shape (1, 8)
        Incremented by the number of accepted proposals.
    """
    n = x.shape[0]
    last = n - 1
    row, work = np.zeros((2, along_x.shape[1], LANES)), np.zeros((4, along_x.shape[1], LANES))
    proposal, ratios, sums, moved_lanes = (
        np.empty((2, LANES)), np.empty((1, LANES)), np.empty((2, LANES)), np.empty((1, LANES)),
    )  # fmt: skip
    s0, s1, s2, s3 = load(words, 0), load(words, 1), load(words, 2), load(words, 3)
    n_accepted = load(accepted, 0)
    for _ in range(n_sweeps):
        for i in range(n):
            swap_rows(x, i, last)
            swap_rows(y, i, last)
            px, py = load(x, last), load(y, last)
            near, power = distance_product(x, y, last, px, py)
            paired, moved = splat(1.0), splat(0.0)
            for _hit in range(n_hits):
                dx, dy, u, s0, s1, s2, s3 = propose(step, s0, s1, s2, s3)
                new_x, new_y = px + dx, py + dy
                store(proposal, 0, new_x)
                store(proposal, 1, new_y)
                for walker in range(LANES):
                    ratios[0, walker] = _ratio_sq(
                        real[walker], imag[walker], i, along_x[walker], along_y[walker],
                        proposal[0, walker], proposal[1, walker], sums,
                    )  # fmt: skip
                new_paired = load(ratios, 0)
                gauss, gauss_power = gaussian_ratio(px, py, dx, dy)
                new_near, new_power = distance_product(x, y, last, new_x, new_y)
                accept = accepts(
                    exponent, u * paired, near, power, gauss * new_paired, gauss_power, new_near, new_power
                )
                px, py = select(accept, new_x, px), select(accept, new_y, py)
                near, power = select(accept, new_near, near), select(accept, new_power, power)
                paired, moved = select(accept, new_paired, paired), select(accept, splat(1.0), moved)
                n_accepted = n_accepted + select(accept, splat(1.0), splat(0.0))
            store(x, last, px)
            store(y, last, py)
            # Back to its own place: rows of the matrix are addressed by the electron.
            swap_rows(x, i, last)
            swap_rows(y, i, last)
            store(moved_lanes, 0, moved)
            for walker in range(LANES):
                if moved_lanes[0, walker] > 0.0:
                    _exchange_electron(
                        n, i, x[i, walker], y[i, walker], along_x[walker], along_y[walker],
                        real[walker], imag[walker], row, work,
                    )  # fmt: skip
    store(accepted, 0, n_accepted)
    store(words, 0, s0)
    store(words, 1, s1)
    store(words, 2, s2)
    store(words, 3, s3)
