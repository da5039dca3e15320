"""Histogram of pair distances of eight walkers on the torus, in the state's own metric."""

from __future__ import annotations

import math

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.lanes import LANES


@kernel
def add_pair_counts(
    a: np.ndarray, b: np.ndarray, tau_real: float, tau_imag: float, side: float, width: float, counts: np.ndarray
) -> None:
    """Count pairs by distance in bins of ``width`` (l_B); farther pairs than the last bin are passed over.

    The nearest image is found by folding first b, then the coordinate along L1. Every image with |y| below half
    the cell's height and |x| below half its side is found, so the bins must end below both.

    Parameters
    ----------
    a, b : ndarray, shape (n_electrons, 8)
        Positions in units of the cell's vectors; z = side (a + b tau).
    counts : ndarray of int64, shape (n_bins, 8)
        Updated.
    """
    n = a.shape[0]
    n_bins = counts.shape[0]
    limit_sq = (n_bins * width) ** 2
    for i in range(n):
        for j in range(i):
            for lane in range(LANES):
                db = b[i, lane] - b[j, lane]
                db -= np.rint(db)
                dx = a[i, lane] - a[j, lane] + db * tau_real
                dx -= np.rint(dx)
                dy = db * tau_imag
                distance_sq = (dx * dx + dy * dy) * side * side
                if distance_sq < limit_sq:
                    counts[int(math.sqrt(distance_sq) / width), lane] += 1
