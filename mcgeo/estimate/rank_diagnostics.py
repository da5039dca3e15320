"""Rank-based convergence diagnostics of several chains of one quantity.

Vehtari, Gelman, Simpson, Carpenter and Bürkner, Bayesian Analysis 16, 667 (2021): chains are cut in halves; ranks
turned into normal deviates make R-hat and the effective sample size meaningful for heavy tails too. Section 3.1 holds
the classical R-hat of equations 1 to 4, section 3.2 the effective sample size with Geyer's truncation, section 4 the
rank normalisation of equation 14, folding and tails (equation numbers from memory).
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from mcgeo.estimate.statistics import lagged_products

Array = NDArray[np.float64]

_LEAST_STEPS = 4
_TAIL = 0.05


def halves(chains: Array) -> Array:
    """Chains of shape (n_chains, n_steps) cut in two, shape (2 n_chains, n_steps // 2); an odd middle is left out."""
    half = chains.shape[1] // 2
    return np.concatenate([chains[:, :half], chains[:, chains.shape[1] - half :]])


def normal_ranks(values: Array) -> Array:
    """Phi^-1((r - 3/8)/(n + 1/4)) of the ranks r of all values together; equal values share their mean rank."""
    flat = values.ravel()
    order = np.argsort(flat)
    ordered = flat[order]
    first = np.flatnonzero(np.r_[True, ordered[1:] != ordered[:-1]])
    end = np.r_[first[1:], len(flat)]
    deviates = ndtri((0.5 * (first + 1 + end) - 0.375) / (len(flat) + 0.25))
    result = np.empty(len(flat))
    result[order] = np.repeat(deviates, end - first)
    return result.reshape(values.shape)


def _r_hat(chains: Array) -> float:
    n = chains.shape[1]
    within = float(chains.var(axis=1, ddof=1).mean())
    between = n * float(chains.mean(axis=1).var(ddof=1))
    return math.sqrt(((n - 1) * within + between) / (n * within)) if within > 0.0 else math.nan


def _effective_samples(chains: Array) -> float:
    """S/tau with Geyer's initial monotone sequence (Stat. Sci. 7, 473 (1992), section 3.3); S where nothing varies."""
    n_chains, n = chains.shape
    means = chains.mean(axis=1)
    covariance = lagged_products(chains - means[:, None]) / n
    if not covariance[0] > 0.0:
        return float(chains.size) if np.ptp(means) == 0.0 else math.nan
    within = covariance[0] * n / (n - 1)
    total = covariance[0] + (means.var(ddof=1) if n_chains > 1 else 0.0)
    correlation = 1.0 - (within - covariance) / total
    correlation[0] = 1.0
    pairs = correlation[: n - n % 2].reshape(-1, 2).sum(axis=1)
    negative = np.flatnonzero(pairs < 0.0)
    cut = int(negative[0]) if len(negative) else len(pairs)
    # Half of a pair that is cut is kept where it is positive: less bias for chains that alternate.
    rest = max(correlation[2 * cut], 0.0) if 2 * cut < n else 0.0
    time = 2.0 * float(np.minimum.accumulate(pairs[:cut]).sum()) - 1.0 + rest
    # Chains that alternate beat independent draws; more than this is not believed.
    return chains.size / max(time, 1.0 / math.log10(chains.size))


class RankDiagnostics(NamedTuple):
    """What ranks say of several chains; NaN for chains of fewer than 4 steps.

    Attributes
    ----------
    r_hat : float
        The larger of rank-normalised split R-hat and of the same of |x - median|, which sees unequal widths: 1 for
        chains of one distribution. NaN where chains do not move at all.
    bulk_samples : float
        Effective sample size for the bulk: that of the rank-normalised halves.
    tail_samples : float
        Effective sample size of the 5 % or the 95 % quantile, whichever is less.
    """

    r_hat: float
    bulk_samples: float
    tail_samples: float


def rank_diagnostics(chains: Array) -> RankDiagnostics:
    """Diagnostics of chains of shape (n_chains, n_steps)."""
    if chains.shape[1] < _LEAST_STEPS:
        return RankDiagnostics(math.nan, math.nan, math.nan)
    cut = halves(chains)
    low, high = np.quantile(chains, [_TAIL, 1.0 - _TAIL])
    deviates = normal_ranks(cut)
    return RankDiagnostics(
        max(_r_hat(deviates), _r_hat(normal_ranks(np.abs(cut - np.median(cut))))),
        _effective_samples(deviates),
        min(_effective_samples((cut <= quantile).astype(float)) for quantile in (low, high)),
    )
