"""Droplets in the plane from the definition of their wavefunctions, without the package under test."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tests.exact.xoshiro import uniforms

Array = NDArray[np.float64]


def log_weight(exponent: int, x: Array, y: Array, *, paired: bool) -> Array:
    """log |Psi|^2 of positions of shape (n_electrons, n_walkers): Laughlin, or Moore-Read with |Pf|^2 = |det|."""
    z = np.moveaxis(x + 1j * y, 0, -1)
    off_diagonal = ~np.eye(len(x), dtype=bool)
    separation = np.where(off_diagonal, z[:, :, None] - z[:, None, :], 1.0)
    total = exponent * np.log(np.abs(separation)).sum(axis=(1, 2)) - 0.5 * (np.abs(z) ** 2).sum(axis=1)
    if paired:
        total += np.linalg.slogdet(np.where(off_diagonal, 1.0 / separation, 0.0))[1]
    return np.asarray(total)


def replayed(
    exponent: int,
    x: Array,
    y: Array,
    words: NDArray[np.uint64],
    step: float,
    n_sweeps: int,
    n_hits: int,
    *,
    paired: bool,
) -> tuple[Array, Array, Array]:
    """Metropolis moves with weights recomputed at every proposal; positions and numbers accepted.

    Laughlin kernels leave the electron visited in the last place, Moore-Read kernels put it back.
    """
    x, y = x.copy(), y.copy()
    streams = [uniforms(words[:, lane].tolist()) for lane in range(x.shape[1])]
    n_accepted = np.zeros(x.shape[1])
    for i in list(range(len(x))) * n_sweeps:
        visited = i if paired else -1
        for array in (x, y):
            array[[i, visited]] = array[[visited, i]]
        for _ in range(n_hits):
            ux, uy, u = np.array([[next(stream) for _ in range(3)] for stream in streams]).T
            new_x, new_y = x.copy(), y.copy()
            new_x[visited] += step * (ux - 0.5)
            new_y[visited] += step * (uy - 0.5)
            gain = log_weight(exponent, new_x, new_y, paired=paired) - log_weight(exponent, x, y, paired=paired)
            accept = u < np.exp(np.minimum(gain, 0.0))
            x, y = np.where(accept, new_x, x), np.where(accept, new_y, y)
            n_accepted += accept
    return x, y, n_accepted
