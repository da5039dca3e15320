"""S(q) as a curve: waves of one length (in the liquid's metric) are taken together."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.statistics import jackknife_error, jackknife_means

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Curve:
    """A function of one variable with errors; arrays of one shape (n,)."""

    x: Array
    value: Array
    error: Array


def shell_means(norm: Array, samples: Array, width: float) -> Curve:
    """S(q) averaged over shells of |q|_g.

    Parameters
    ----------
    norm : ndarray, shape (n_waves,)
        |q|_g in 1/l_B.
    samples : ndarray, shape (n_samples, n_waves)
        Independent samples of S(q).
    width : float
        Width of a shell. Empty shells are left out; 0 keeps waves of equal length together and no others.
    """
    key = np.floor(norm / width) if width > 0.0 else np.round(norm, 9)
    _, shell = np.unique(key, return_inverse=True)
    count = np.bincount(shell)
    means = jackknife_means(samples)
    by_shell = np.stack([np.bincount(shell, weights=mean) for mean in means]) / count
    value = np.bincount(shell, weights=samples.mean(axis=0)) / count
    return Curve(np.bincount(shell, weights=norm) / count, value, jackknife_error(by_shell))
