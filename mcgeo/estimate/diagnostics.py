"""Whether a run may be trusted, in one word."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

CONVERGED, SHORT, MIXING, STUCK = "converged", "short", "mixing", "stuck"

_LEAST_ACCEPTANCE = 0.02
_LARGEST_R_HAT = 1.05
_LEAST_SAMPLES = 100.0


@dataclass(frozen=True)
class Diagnostics:
    """Health of a run.

    Attributes
    ----------
    acceptance : float
    autocorrelation_time : float
        Of the energy, in sweeps.
    effective_samples : float
        Independent energies in the whole run.
    r_hat : float
        Split R-hat of the energy over walkers; NaN for fewer than two half-chains of two values.
    verdict : str
        ``stuck``: acceptance below 2 %. ``mixing``: walkers disagree (R-hat above 1.05). ``short``: fewer than 100
        independent samples. ``converged``: none of these.
    """

    acceptance: float
    autocorrelation_time: float
    effective_samples: float
    r_hat: float
    verdict: str


def split_r_hat(chains: Array) -> float:
    """Split R-hat of chains, shape (n_chains, n_steps): Gelman et al., Bayesian Data Analysis, 3rd ed., eq. 11.4."""
    half = chains.shape[1] // 2
    if half < 2:
        return math.nan
    halves = np.concatenate([chains[:, :half], chains[:, -half:]])
    within = float(halves.var(axis=1, ddof=1).mean())
    between = half * float(halves.mean(axis=1).var(ddof=1))
    return math.sqrt(((half - 1) / half * within + between / half) / within) if within > 0.0 else math.nan


def diagnose(trace: Array, accepted: Array, time_in_measurements: float, sweeps_between: int) -> Diagnostics:
    """Diagnostics from the energy trace.

    Parameters
    ----------
    trace : ndarray, shape (n_components, n_blocks, n_walkers, n_measurements)
    accepted : ndarray, shape (n_components, n_blocks, n_walkers)
    time_in_measurements : float
        Integrated autocorrelation time.
    sweeps_between : int
        Sweeps from one measurement to the next.
    """
    n_components, _, n_walkers, _ = trace.shape
    series = np.moveaxis(trace, 2, 1).reshape(n_components, n_walkers, -1)
    r_hats = [split_r_hat(x) for x in series]
    r_hat = max(r_hats) if all(math.isfinite(r) for r in r_hats) else math.nan
    acceptance = float(accepted.mean())
    samples = series.size / max(time_in_measurements, 1.0)
    verdict = CONVERGED
    if samples < _LEAST_SAMPLES:
        verdict = SHORT
    if r_hat > _LARGEST_R_HAT:
        verdict = MIXING
    if acceptance < _LEAST_ACCEPTANCE:
        verdict = STUCK
    return Diagnostics(acceptance, time_in_measurements * sweeps_between, samples, r_hat, verdict)
