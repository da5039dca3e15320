"""Rank-based R-hat and effective sample sizes against a general library and against closed forms."""

import math

import numpy as np
import pytest
from arviz_stats.base import array_stats

from mcgeo.estimate.rank_diagnostics import halves, normal_ranks, rank_diagnostics
from tests.physics.autoregressive import autoregressive

RANDOM = np.random.default_rng(1)
CHAINS = {
    "independent": RANDOM.standard_normal((4, 1000)),
    "autoregressive": autoregressive(RANDOM, 0.9, (8, 1001)),
    "alternating": autoregressive(RANDOM, -0.6, (8, 999)),
    "heavy tails": RANDOM.standard_cauchy((4, 500)),
    "repeated values": np.repeat(RANDOM.standard_normal((5, 100)), 7, axis=1),
    "unequal widths": RANDOM.standard_normal((4, 400)) * np.array([[1.0], [1.0], [1.0], [3.0]]),
    "drifting": RANDOM.standard_normal((6, 800)) + np.linspace(0.0, 2.0, 800),
    "few steps": RANDOM.standard_normal((8, 21)),
}


@pytest.mark.parametrize("name", CHAINS)
def test_against_a_general_library(name):
    chains = CHAINS[name]
    assert rank_diagnostics(chains).r_hat == pytest.approx(array_stats.rhat(chains, method="rank"), rel=1e-12)
    # Where correlations last as long as a half-chain the library stops one pair of lags before its end.
    tolerance = 0.02 if name in ("drifting", "unequal widths") else 1e-9
    assert rank_diagnostics(chains).bulk_samples == pytest.approx(array_stats.ess(chains, method="bulk"), rel=tolerance)
    tail = array_stats.ess(chains, method="tail", prob=(0.05, 0.95))
    assert rank_diagnostics(chains).tail_samples == pytest.approx(tail, rel=tolerance)


@pytest.mark.parametrize("a", [0.0, 0.5, 0.9])
def test_effective_samples_in_closed_form(a):
    chains = autoregressive(np.random.default_rng(2), a, (16, 8000))
    exact = chains.size * (1.0 - a) / (1.0 + a)
    assert rank_diagnostics(chains).bulk_samples == pytest.approx(exact, rel=0.06)
    assert rank_diagnostics(chains).tail_samples > exact * 0.94


def test_what_r_hat_sees():
    random = np.random.default_rng(3)
    agreeing = random.standard_normal((8, 1000))
    assert rank_diagnostics(agreeing).r_hat < 1.005
    shifted, wider = agreeing.copy(), agreeing.copy()
    shifted[3] += 1.0
    wider[3] *= 4.0
    for chains in (shifted, wider, agreeing + np.linspace(0.0, 1.0, 1000)):
        assert rank_diagnostics(chains).r_hat > 1.03
    # Any monotonic function of the values has the same ranks.
    stretched = rank_diagnostics(np.exp(5.0 * agreeing))
    assert stretched.bulk_samples == pytest.approx(rank_diagnostics(agreeing).bulk_samples, rel=1e-12)


def test_ranks_of_equal_values():
    deviates = normal_ranks(np.array([[3.0, 1.0], [3.0, 7.0]]))
    assert deviates[0, 0] == deviates[1, 0] == pytest.approx(0.0)
    assert deviates[0, 1] == pytest.approx(-deviates[1, 1])


def test_degenerate_chains():
    assert np.array_equal(halves(np.arange(5.0)[None]), [[0.0, 1.0], [3.0, 4.0]])
    short, still = np.zeros((4, 3)), np.ones((4, 100))
    assert all(math.isnan(value) for value in rank_diagnostics(short))
    assert math.isnan(rank_diagnostics(still).r_hat)
    # Chains that stand still at different places are not independent samples of anything.
    apart = np.repeat(np.arange(4.0)[:, None], 100, axis=1)
    assert not rank_diagnostics(apart).bulk_samples > 5.0 and not rank_diagnostics(apart).r_hat < 10.0
