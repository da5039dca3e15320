"""The plateau of blocked errors against closed forms."""

import math

import numpy as np
import pytest

from mcgeo.estimate.blocking import blocking
from tests.physics.autoregressive import autoregressive, error_of_mean
from tests.physics.checks import require_unit_pulls


def found_in(a, shape, n_runs):
    random = np.random.default_rng(4)
    return [blocking(autoregressive(random, a, shape)) for _ in range(n_runs)]


@pytest.mark.parametrize(("a", "shape"), [(0.0, (8, 1000)), (0.5, (16, 1000)), (0.9, (16, 4000)), (0.9, (2, 10000))])
def test_error_in_closed_form(a, shape):
    runs, exact = found_in(a, shape, 30), error_of_mean(a, shape)
    assert all(run.reached for run in runs)
    # The plateau starts where what is still missing of the error equals its scatter.
    assert np.mean([run.error for run in runs]) == pytest.approx(exact, rel=0.05)
    scatter = np.std([run.error for run in runs], ddof=1)
    assert scatter == pytest.approx(np.mean([run.error_error for run in runs]), rel=0.5)
    if a == 0.0:
        require_unit_pulls([(run.error - exact) / run.error_error for run in runs])
    assert all(run.block >= (1.0 + a) / (1.0 - a) for run in runs)


def test_chains_shorter_than_their_correlations_have_no_plateau():
    # 200 steps of correlation in 100 steps of a lone chain.
    shape = (1, 100)
    runs = found_in(0.99, shape, 40)
    assert sum(run.reached for run in runs) < 10
    assert np.mean([run.error for run in runs]) < 0.7 * error_of_mean(0.99, shape)
    # Whole walkers are independent whatever their steps do.
    many = found_in(0.99, (64, 100), 10)
    assert np.mean([run.error for run in many]) == pytest.approx(error_of_mean(0.99, (64, 100)), rel=0.05)


def test_chains_that_disagree_have_no_plateau():
    random = np.random.default_rng(5)
    agreeing = random.standard_normal((8, 4000))
    assert blocking(agreeing).reached
    apart = blocking(agreeing + 0.2 * random.standard_normal((8, 1)))
    assert not apart.reached
    assert apart.error > 5.0 * blocking(agreeing).error


def test_nothing_to_judge():
    for chains in (np.ones((4, 10)), np.ones((1, 1))):
        found = blocking(chains)
        assert math.isnan(found.error) and not found.reached
