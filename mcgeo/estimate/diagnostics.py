"""Whether a run may be trusted, in one word, and how many sweeps it lacks."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.blocking import Blocking, blocking
from mcgeo.estimate.rank_diagnostics import halves, rank_diagnostics
from mcgeo.estimate.statistics import integrated_autocorrelation_time

Array = NDArray[np.float64]

CONVERGED, SHORT, MIXING, STUCK = "converged", "short", "mixing", "stuck"

LEAST_ACCEPTANCE = 0.02
LARGEST_DRIFT = 1e-6
LARGEST_RULE_Z = 5.0
# Vehtari et al. (2021), section 4: 100 for each of four chains.
LEAST_SAMPLES = 400.0
_R_HAT = 1.01
_MARGIN = 1.1


@dataclass(frozen=True)
class Diagnostics:
    """Health of a run.

    Attributes
    ----------
    acceptance, least_acceptance : float
        Mean, and that of the walker with the fewest accepted moves.
    autocorrelation_time : float
        Of the energy, in sweeps (Sokal's window); the slowest component's.
    effective_samples : float
        Energies over their autocorrelation time.
    bulk_samples, tail_samples : float
        Effective sample sizes of `mcgeo.estimate.rank_diagnostics`, all components together.
    r_hat, r_hat_limit : float
        Rank-normalised R-hat, the largest of all components, and where walkers begin to disagree: see `r_hat_limit`.
    blocking : Blocking
        Error of the mean energy, without control variates, its block in sweeps.
    drift : float
        Largest relative error of values stored between moves, found when they were made anew.
    rules : mapping of name to float
        Exact sum rules in standard errors.
    verdict : str
        ``stuck``: a walker accepts less than 2 %, or stored values drift by more than 1e-6: more sweeps do not help.
        ``mixing``: walkers disagree (R-hat above its limit), or an exact rule is off by more than five errors.
        ``short``: fewer than 400 independent samples, or no plateau of the blocked error, or blocks still missing, or
        an error above its target.
        ``converged``: none of these.
    reasons : tuple of str
        What spoke against ``converged``, with figures.
    sweeps_to_add : int or None
        Sweeps of each walker that should make it converge, 0 when it has; None where more sweeps do not help.
    """

    acceptance: float
    least_acceptance: float
    autocorrelation_time: float
    effective_samples: float
    bulk_samples: float
    tail_samples: float
    r_hat: float
    r_hat_limit: float
    blocking: Blocking
    drift: float
    rules: Mapping[str, float]
    verdict: str
    reasons: tuple[str, ...]
    sweeps_to_add: int | None


@dataclass(frozen=True)
class RunLength:
    """How far a run has come.

    Attributes
    ----------
    sweeps_between : int
        Sweeps from one measurement to the next.
    sweeps_per_block : int
    blocks_planned : int
    """

    sweeps_between: int
    sweeps_per_block: int
    blocks_planned: int


@dataclass
class _Findings:
    """Faults found so far: the gravest verdict, why, and by what factor the run ought to grow."""

    verdict: str = CONVERGED
    reasons: list[str] = field(default_factory=list)
    growth: float = 1.0

    def add(self, verdict: str, reason: str, growth: float = 1.0) -> None:
        order = (CONVERGED, SHORT, MIXING, STUCK)
        self.verdict = max(self.verdict, verdict, key=order.index)
        self.reasons.append(reason)
        self.growth = max(self.growth, growth)


def r_hat_limit(samples_per_half: float, n_halves: int) -> float:
    """R-hat above which chains disagree.

    Half-chains of n independent values that agree have R-hat = 1 + (chi^2/(n_halves - 1))/(2n) with n_halves - 1
    degrees of freedom: 1.01, the bound of Vehtari et al. (2021), plus this mean and four of its standard deviations.
    Many short chains then pass as few long ones do.
    """
    if n_halves < 2 or not samples_per_half > 0.0:
        return math.nan
    return _R_HAT + (1.0 + 4.0 * math.sqrt(2.0 / (n_halves - 1))) / (2.0 * samples_per_half)


def _limit_of(chains: Array) -> float:
    """The same with the autocorrelation time about the half-chains' own means, which no disagreement enters."""
    cut = halves(chains)
    time = integrated_autocorrelation_time(cut - cut.mean(axis=1, keepdims=True))
    return r_hat_limit(cut.shape[1] / max(time, 1.0), len(cut)) if math.isfinite(time) else math.nan


def diagnose(
    trace: Array,
    accepted: Array,
    drift: Array,
    rules: Mapping[str, float],
    time_in_measurements: float,
    length: RunLength,
    missed_target: tuple[str, float] | None = None,
) -> Diagnostics:
    """Diagnostics from the energy trace.

    Parameters
    ----------
    trace : ndarray, shape (n_components, n_blocks, n_walkers, n_measurements)
    accepted : ndarray, shape (n_components, n_blocks, n_walkers)
    drift : ndarray, shape (n_components, n_blocks)
    rules : mapping of name to float
        Exact rules in standard errors.
    time_in_measurements : float
        Integrated autocorrelation time.
    length : RunLength
    missed_target : tuple of str and float, optional
        An error that was to be smaller, in words, and by what factor the run ought to grow for it.
    """
    n_components, n_blocks, n_walkers, _ = trace.shape
    chains = np.moveaxis(trace, 2, 1).reshape(n_components, n_walkers, -1)
    samples = chains.size / max(time_in_measurements, 1.0)
    limit = _largest([_limit_of(x) for x in chains])
    ranks = [rank_diagnostics(x) for x in chains]
    # A mean over components has the error of all of them: the harmonic mean counts.
    bulk = n_components**2 / sum(1.0 / found.bulk_samples for found in ranks)
    tail = n_components**2 / sum(1.0 / found.tail_samples for found in ranks)
    r_hat = _largest([found.r_hat for found in ranks])
    plateau = _of_components([blocking(x) for x in chains], length.sweeps_between)
    walkers = accepted.mean(axis=1)
    found = _Findings()
    if n_blocks < length.blocks_planned:
        found.add(SHORT, f"incomplete: {n_blocks} of {length.blocks_planned} blocks", length.blocks_planned / n_blocks)
    if missed_target is not None:
        found.add(SHORT, *missed_target)
    fewest = min(samples, bulk, tail) if math.isfinite(bulk + tail) else samples
    if not fewest >= LEAST_SAMPLES:
        reason = f"{fewest:.3g} independent samples, at least {LEAST_SAMPLES:g} are needed"
        found.add(SHORT, reason, LEAST_SAMPLES / fewest)
    if not plateau.reached:
        found.add(SHORT, "the error has not reached its plateau over block lengths", 2.0)
    if r_hat > limit:
        growth = max(2.0, (r_hat - 1.0) / (limit - 1.0))
        found.add(MIXING, f"walkers disagree: R-hat {r_hat:.3f}, at most {limit:.3f}", growth)
    for name, z in rules.items():
        if not abs(z) <= LARGEST_RULE_Z:
            found.add(MIXING, f"{name.replace('_', ' ')} is {z:.1f} errors from its exact value", 2.0)
    if walkers.min() < LEAST_ACCEPTANCE:
        found.add(STUCK, f"a walker accepts {walkers.min():.1%} of its moves")
    if not drift.max() <= LARGEST_DRIFT:
        found.add(STUCK, f"stored values drift by {drift.max():.1e} within a block; raise sampling.blocks")
    return Diagnostics(
        float(accepted.mean()),
        float(walkers.min()),
        time_in_measurements * length.sweeps_between,
        samples,
        bulk,
        tail,
        r_hat,
        limit,
        plateau,
        float(drift.max()),
        rules,
        found.verdict,
        tuple(found.reasons),
        _sweeps_to_add(found, n_blocks, length),
    )


def _largest(values: list[float]) -> float:
    return max(values) if all(math.isfinite(value) for value in values) else math.nan


def _of_components(found: list[Blocking], sweeps_between: int) -> Blocking:
    """Error of the mean over independent components; their longest block, in sweeps."""
    error = math.hypot(*(x.error for x in found)) / len(found)
    spread = math.hypot(*(x.error * x.error_error for x in found)) / len(found) ** 2
    return Blocking(
        error,
        spread / error if error > 0.0 else math.nan,
        max(x.block for x in found) * sweeps_between,
        all(x.reached for x in found),
    )


def _sweeps_to_add(found: _Findings, n_blocks: int, length: RunLength) -> int | None:
    """Whole blocks, with a tenth more than the figures ask for; just the missing blocks where nothing else lacks."""
    if found.verdict in (CONVERGED, STUCK):
        return 0 if found.verdict == CONVERGED else None
    missing = length.blocks_planned - n_blocks
    wanted = math.ceil(n_blocks * (found.growth * _MARGIN - 1.0) - 1e-9)
    return max(missing, wanted if len(found.reasons) > (missing > 0) else 0) * length.sweeps_per_block
