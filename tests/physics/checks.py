"""Comparisons with exact values in units of the tool's own error; tests show that each can fail."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.stats import chi2, f

from mcgeo.runs.liquid import Liquid

Sampler = Callable[..., Liquid]

LARGEST_Z = 4.0
LEAST_PROBABILITY = 1e-4


def require_agreement(value: ArrayLike, error: ArrayLike, exact: ArrayLike, tolerance: float = 0.0) -> None:
    """Every value within ``tolerance`` plus four errors of the exact one; errors are finite."""
    value, error, exact = np.broadcast_arrays(*(np.asarray(x, dtype=float) for x in (value, error, exact)))
    assert np.all(np.isfinite(error)) and np.all(error >= 0.0)
    excess = np.abs(value - exact) - tolerance
    worst = int(np.argmax(excess - LARGEST_Z * error))
    assert np.all(excess <= LARGEST_Z * error), (
        f"{value.ravel()[worst]} +- {error.ravel()[worst]} against {exact.ravel()[worst]}"
    )


def require_unit_pulls(pulls: ArrayLike) -> None:
    """Independent normal deviates: none beyond four, the sum of squares neither too large nor too small.

    Too small a sum says that the errors are overestimated.
    """
    z = np.asarray(pulls, dtype=float).ravel()
    total = float(z @ z)
    assert np.all(np.abs(z) < LARGEST_Z), f"pulls {z}"
    tails = (chi2.sf(total, len(z)), chi2.cdf(total, len(z)))
    assert min(tails) > LEAST_PROBABILITY, f"sum of squared pulls {total} of {len(z)}"


def mean_probability(samples: NDArray[np.float64], exact: ArrayLike) -> float:
    """Chance of means as far from ``exact`` as these or farther, correlations between quantities taken along.

    Hotelling's T^2 (Anderson, An Introduction to Multivariate Statistical Analysis, section 5.2).

    Parameters
    ----------
    samples : ndarray, shape (n_samples, n_quantities)
    exact : array_like, shape (n_quantities,)
    """
    n, p = samples.shape
    deviation = samples.mean(axis=0) - np.asarray(exact)
    t_squared = n * deviation @ np.linalg.solve(np.cov(samples.T), deviation)
    return float(f.sf(t_squared * (n - p) / (p * (n - 1)), p, n - p))
