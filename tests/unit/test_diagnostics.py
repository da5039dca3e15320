"""Verdicts on runs, their reasons, and the sweeps they ask for."""

import math

import numpy as np
import pytest

from mcgeo.estimate.diagnostics import RunLength, diagnose, r_hat_limit
from mcgeo.estimate.rank_diagnostics import rank_diagnostics
from mcgeo.estimate.statistics import integrated_autocorrelation_time
from mcgeo.report.text import verdict_text
from tests.physics.autoregressive import autoregressive

WALKERS, BLOCKS, BETWEEN = 16, 10, 4


def health(chains, *, acceptance=0.4, drift=0.0, rules=None, planned=BLOCKS):
    """Of one component's chains, shape (n_walkers, n_steps), in ten blocks."""
    n_walkers, n = chains.shape
    trace = chains.reshape(n_walkers, BLOCKS, -1).swapaxes(0, 1)[None]
    accepted = np.full((1, BLOCKS, n_walkers), acceptance)
    length = RunLength(BETWEEN, BETWEEN * n // BLOCKS, planned)
    time = integrated_autocorrelation_time(chains)
    return diagnose(trace, accepted, np.full((1, BLOCKS), drift), rules or {"rule": 1.0}, time, length)


def chains(a=0.5, steps=500, seed=1):
    return autoregressive(np.random.default_rng(seed), a, (WALKERS, steps))


def test_a_good_run():
    found = health(chains())
    assert (found.verdict, found.reasons, found.sweeps_to_add) == ("converged", (), 0)
    assert found.autocorrelation_time == pytest.approx(3.0 * BETWEEN, rel=0.1)
    assert found.effective_samples == pytest.approx(WALKERS * 500 / 3.0, rel=0.1)
    assert found.bulk_samples == pytest.approx(found.effective_samples, rel=0.15)
    assert found.blocking.reached and found.blocking.block % BETWEEN == 0


def test_a_short_run_asks_for_what_it_lacks():
    found = health(chains(steps=50))
    assert found.verdict == "short" and "independent samples, at least 400" in found.reasons[0]
    assert found.sweeps_to_add % (BETWEEN * 5) == 0
    # With them it has converged.
    longer = 50 + found.sweeps_to_add // BETWEEN
    assert health(chains(steps=longer // BLOCKS * BLOCKS)).verdict == "converged"


def test_walkers_that_disagree():
    apart = chains() + 0.8 * np.random.default_rng(2).standard_normal((WALKERS, 1))
    found = health(apart)
    assert found.verdict == "mixing" and found.r_hat > found.r_hat_limit
    assert any("R-hat" in reason for reason in found.reasons) and any("plateau" in reason for reason in found.reasons)
    assert found.sweeps_to_add >= 500 * BETWEEN


def test_slow_chains_have_no_plateau():
    found = health(chains(a=0.995, steps=100))
    assert found.verdict in ("short", "mixing") and not found.blocking.reached


@pytest.mark.parametrize(
    ("keys", "verdict", "words"),
    [
        ({"acceptance": 0.01}, "stuck", "accepts 1.0%"),
        ({"drift": 1e-5}, "stuck", "drift by 1.0e-05"),
        ({"drift": math.nan}, "stuck", "drift"),
        ({"rules": {"pair_count": -7.0}}, "mixing", "pair count is -7.0 errors"),
        ({"rules": {"pair_count": math.nan}}, "mixing", "pair count is nan"),
        ({"planned": 40}, "short", "incomplete: 10 of 40 blocks"),
    ],
)
def test_one_fault_is_enough(keys, verdict, words):
    found = health(chains(), **keys)
    assert found.verdict == verdict and words in found.reasons[0] and len(found.reasons) == 1
    expected = {"stuck": None, "mixing": 12 * 50 * BETWEEN, "short": 30 * 50 * BETWEEN}[verdict]
    assert found.sweeps_to_add == expected


def test_one_still_walker_is_seen():
    trace = chains()
    accepted = np.full((1, BLOCKS, WALKERS), 0.4)
    accepted[:, :, 3] = 0.0
    shape = trace.reshape(WALKERS, BLOCKS, -1).swapaxes(0, 1)[None]
    found = diagnose(shape, accepted, np.zeros((1, BLOCKS)), {}, 3.0, RunLength(1, 50, BLOCKS))
    assert found.verdict == "stuck" and found.acceptance > 0.3 and found.least_acceptance == 0.0


@pytest.mark.parametrize(("walkers", "steps"), [(4, 400), (32, 40), (8, 2000)])
def test_limit_of_r_hat_lets_chains_that_agree_pass(walkers, steps):
    random = np.random.default_rng(6)
    limit = r_hat_limit(steps / 2.0, 2 * walkers)
    found = [rank_diagnostics(random.standard_normal((walkers, steps))).r_hat for _ in range(200)]
    assert max(found) < limit
    # Without the allowance many short chains would not.
    if steps == 40:
        assert max(found) > 1.01


def test_components_count_together():
    one, other = chains(seed=3), chains(seed=4)
    trace = np.stack([x.reshape(WALKERS, BLOCKS, -1).swapaxes(0, 1) for x in (one, other)])
    accepted, drift = np.full((2, BLOCKS, WALKERS), 0.4), np.zeros((2, BLOCKS))
    found = diagnose(trace, accepted, drift, {}, 3.0, RunLength(1, 50, BLOCKS))
    alone = health(one)
    assert found.bulk_samples == pytest.approx(2.0 * alone.bulk_samples, rel=0.2)
    assert found.blocking.error == pytest.approx(alone.blocking.error / math.sqrt(2.0), rel=0.2)
    assert found.r_hat == max(rank_diagnostics(one).r_hat, rank_diagnostics(other).r_hat)


def test_words():
    assert verdict_text({"verdict": "converged", "reasons": [], "sweeps_to_add": 0}) == "converged"
    few = {"verdict": "short", "reasons": ["few"], "sweeps_to_add": 96}
    assert verdict_text(few) == "short: few; mcgeo sample CONFIG --extend 96"
    still = {"verdict": "stuck", "reasons": ["still"], "sweeps_to_add": None}
    assert verdict_text(still).startswith("stuck: still; lower sampling.step")
    cut = {"verdict": "short", "reasons": ["incomplete: 3 of 16 blocks"], "sweeps_to_add": 8}
    assert verdict_text(cut) == "short: incomplete: 3 of 16 blocks; the same command goes on"
