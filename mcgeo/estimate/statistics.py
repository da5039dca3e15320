"""Errors of Monte Carlo means: autocorrelation, block samples, jackknife."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

# Sokal's window: the sum of the autocorrelation function stops at the first lag above this many times.
_WINDOW = 5.0
# Blocks longer than this many autocorrelation times are treated as independent samples; their neighbours share about
# one autocorrelation time, which makes errors too small by 1 % at this length.
_INDEPENDENT_BLOCK = 40.0
JACKKNIFE_GROUPS = 64


@dataclass(frozen=True)
class Estimate:
    """A number with its error.

    Attributes
    ----------
    value, error : float
        Mean and its standard error.
    autocorrelation_time : float
        Integrated autocorrelation time in sweeps; NaN where there is no time series.
    effective_samples : float
        Number of independent samples behind the mean; NaN where unknown.
    """

    value: float
    error: float
    autocorrelation_time: float = math.nan
    effective_samples: float = math.nan

    def as_dict(self) -> dict[str, float]:
        """``value`` and ``error``."""
        return {"value": self.value, "error": self.error}


def lagged_products(chains: Array) -> Array:
    """sum_i x_i x_(i+t) for every lag t, averaged over chains of shape (n_chains, n_steps): shape (n_steps,)."""
    n = chains.shape[1]
    length = 1 << (2 * n - 1).bit_length()
    power = np.zeros(length // 2 + 1)
    # Chain by chain: transforms of long runs would not fit into memory side by side.
    for chain in chains:
        transform = np.fft.rfft(chain, length)
        power += transform.real**2 + transform.imag**2
    return np.asarray(np.fft.irfft(power / len(chains), length)[:n])


def integrated_autocorrelation_time(series: ArrayLike) -> float:
    """tau = 1 + 2 sum_t rho(t) of series of shape (n_chains, n_steps), in steps; 1 for independent values.

    The autocorrelation functions of the chains are averaged about their common mean before the sum is cut at the first
    lag W >= 5 tau(W) (Sokal, Monte Carlo Methods in Statistical Mechanics (1996), section 3). A process
    x' = a x + noise has (1 + a)/(1 - a). A constant series, or one of fewer than 4 steps, gives NaN.
    """
    x = np.atleast_2d(np.asarray(series, dtype=float))
    n = x.shape[1]
    if n < 4:
        return math.nan
    covariance = lagged_products(x - x.mean()) / np.arange(n, 0, -1)
    if not covariance[0] > 0.0:
        return math.nan
    times = 2.0 * np.cumsum(covariance / covariance[0]) - 1.0
    window = np.flatnonzero(np.arange(n) >= _WINDOW * times)
    return float(max(times[window[0] if len(window) else n - 1], 1.0 / n))


def mean_estimate(samples: ArrayLike) -> Estimate:
    """Mean of independent samples, shape (n_samples,), and its standard error."""
    x = np.asarray(samples, dtype=float)
    return Estimate(float(x.mean()), float(x.std(ddof=1) / math.sqrt(len(x))), math.nan, float(len(x)))


def independent_samples(blocks: NDArray[Any], block_in_times: float) -> Array:
    """Samples that may be treated as independent.

    Parameters
    ----------
    blocks : ndarray, shape (n_blocks, n_walkers, ...)
    block_in_times : float
        Length of a block in integrated autocorrelation times.

    Returns
    -------
    ndarray, shape (n_samples, ...)
        Every block of every walker where blocks are long enough, otherwise each walker's mean (walkers are
        independent whatever their blocks do); blocks again when there are fewer than 8 walkers.
    """
    n_blocks, n_walkers = blocks.shape[:2]
    if block_in_times >= _INDEPENDENT_BLOCK or n_walkers < 8:
        return blocks.reshape(n_blocks * n_walkers, *blocks.shape[2:])
    return np.asarray(blocks.mean(axis=0))


def jackknife_means(samples: Array) -> Array:
    """Means with one group of samples left out in turn, shape (n_groups, ...); 64 groups or one per sample.

    The groups are of equal size; left-over samples at the end join the groups in turn.
    """
    n = len(samples)
    n_groups = min(n, JACKKNIFE_GROUPS)
    label = np.arange(n) % n_groups
    total = samples.sum(axis=0)
    sums = np.zeros((n_groups, *samples.shape[1:]))
    np.add.at(sums, label, samples)
    left = n - np.bincount(label, minlength=n_groups)
    return np.asarray((total - sums) / left.reshape(-1, *([1] * (samples.ndim - 1))))


def samples_with_deviation(samples: Array, deviation: Array) -> Array:
    """Independent samples and two more, which make room for a deviation in the error of all that follows from them.

    Mean and jackknife error of any linear f are those of the samples, but for |f(deviation)| added to the error in
    quadrature: with N = n + 2, f = f(mean) +- sqrt(N (N - 1)/2) f(deviation) of the two adds 2 N (N - 1)/2
    f(deviation)^2 to the sum of squares, of which the error's square is 1/(N (N - 1)); the others are drawn
    apart by sqrt(N (N - 1)/(n (n - 1))) to keep their part. The two's jackknife replicas lie at 0.7 deviations from
    the mean: what is not linear in between is lost.

    Parameters
    ----------
    samples : ndarray, shape (n, ...)
        At most 62, so that each is a group of the jackknife by itself.
    deviation : ndarray, shape (...)

    Raises
    ------
    ValueError
        If there are more samples.
    """
    n = len(samples)
    total = n + 2
    if total > JACKKNIFE_GROUPS:
        raise ValueError(f"{n} samples leave no room for two more in {JACKKNIFE_GROUPS} groups of a jackknife")
    mean = samples.mean(axis=0)
    scatter = math.sqrt(total * (total - 1) / (n * (n - 1))) * (samples - mean)
    step = math.sqrt(total * (total - 1) / 2) * deviation
    return np.asarray(mean + np.concatenate([scatter, [step, -step]]))


def jackknife_error(replicas: ArrayLike) -> Array:
    """Standard error from the values of a function at `jackknife_means`, along the first axis.

    sqrt((n - 1)/n sum (f_i - mean)^2): Efron and Stein, Ann. Stat. 9, 586 (1981), equation 1.3.
    """
    f = np.asarray(replicas, dtype=float)
    n = len(f)
    return np.asarray(np.sqrt((n - 1) / n * np.sum((f - f.mean(axis=0)) ** 2, axis=0)))


def jackknife(function: Callable[[Array], Array | float], samples: Array) -> tuple[Array, Array]:
    """Value of ``function`` at the mean of the samples, and its jackknife error."""
    value = np.asarray(function(samples.mean(axis=0)))
    return value, jackknife_error(np.array([function(mean) for mean in jackknife_means(samples)]))
