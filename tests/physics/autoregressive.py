"""A process whose correlations are known: x' = a x + noise."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def autoregressive(rng: np.random.Generator, a: float, shape: tuple[int, int]) -> Array:
    """x' = a x + noise with unit variance, started in equilibrium; shape (n_chains, n_steps)."""
    x = rng.standard_normal(shape)
    x[:, 1:] *= math.sqrt(1.0 - a * a)
    for t in range(1, shape[1]):
        x[:, t] += a * x[:, t - 1]
    return x


def error_of_mean(a: float, shape: tuple[int, int]) -> float:
    """Standard deviation of the mean: n v = (1 + a)/(1 - a) - 2a (1 - a^n)/(n (1 - a)^2) for one chain of n steps.

    From sum over all pairs of a^|i-j|; Priestley, Spectral Analysis and Time Series (1981), section 5.3.2.
    """
    n_chains, n = shape
    variance = ((1.0 + a) / (1.0 - a) - 2.0 * a * (1.0 - a**n) / (n * (1.0 - a) ** 2)) / n
    return math.sqrt(variance / n_chains)
