"""Regression on controls: what it removes, when it refuses, and that its errors are honest."""

import numpy as np
import pytest
from scipy import stats

from mcgeo.estimate.control_variates import FEW_BLOCKS, NOT_ZERO, USED, cleared, control_z
from mcgeo.kernels.stein import POWERS, edge_bias, stein_tables
from tests.physics.checks import require_unit_pulls

SHAPE = (8, 16)


def correlated_controls(random, n_controls, shape=SHAPE):
    return random.standard_normal((*shape, n_controls)) @ random.standard_normal((n_controls, n_controls))


def test_what_is_linear_in_the_controls_is_removed():
    random = np.random.default_rng(1)
    controls = correlated_controls(random, 3)
    beta = random.standard_normal((3, 5))
    found = cleared(2.0 + controls @ beta, controls, np.zeros(3))
    assert found.verdict == USED
    np.testing.assert_allclose(found.blocks, 2.0, atol=1e-4)


def test_linear_functions_are_cleared_like_the_blocks():
    random = np.random.default_rng(2)
    controls = correlated_controls(random, 3)
    blocks = random.standard_normal((*SHAPE, 6)) + controls @ random.standard_normal((3, 6))
    weights = random.standard_normal(6)
    together = cleared(blocks, controls, np.zeros(3)).blocks @ weights
    alone = cleared((blocks @ weights)[..., None], controls, np.zeros(3)).blocks[..., 0]
    np.testing.assert_allclose(together, alone, atol=1e-12)
    assert together.var() < 0.8 * (blocks @ weights).var()


def test_walkers_have_the_pseudo_values_of_the_jackknife():
    # Tukey, Ann. Math. Stat. 29, 614 (1958): n t - (n - 1) t_(without one), with t by a general least-squares routine.
    random = np.random.default_rng(3)
    for n_walkers in (16, 70):
        controls = correlated_controls(random, 2, (8, n_walkers))
        blocks = random.standard_normal((8, n_walkers)) + controls @ np.ones(2)

        def mean(kept, blocks=blocks, controls=controls):
            design = np.concatenate([np.ones((kept.sum() * 8, 1)), controls[:, kept].reshape(-1, 2)], axis=1)
            return np.linalg.lstsq(design, blocks[:, kept].ravel())[0][0]

        # Seventy walkers make folds of one and of two.
        fold = np.arange(n_walkers) % 64
        found = cleared(blocks[..., None], controls, np.zeros(2)).blocks[..., 0]
        for f in (0, 5, 12):
            ratio = n_walkers / np.sum(fold == f)
            expected = ratio * mean(fold >= 0) - (ratio - 1.0) * mean(fold != f)
            assert found[:, fold == f].mean() == pytest.approx(expected, abs=1e-6)


def test_refusals():
    random = np.random.default_rng(4)
    controls, blocks = correlated_controls(random, 3), random.standard_normal((*SHAPE, 2))
    off_zero = cleared(blocks, controls, np.array([0.0, -5.1, 0.0]))
    undefined = cleared(blocks, controls, np.array([0.0, np.nan, 0.0]))
    few = cleared(blocks[:1, :9], controls[:1, :9], np.zeros(3))
    assert (off_zero.verdict, undefined.verdict, few.verdict) == (NOT_ZERO, NOT_ZERO, FEW_BLOCKS)
    assert off_zero.blocks is blocks
    assert cleared(blocks, controls, np.full(3, 4.9)).verdict == USED


def test_few_blocks_use_the_first_controls():
    random = np.random.default_rng(7)
    controls = correlated_controls(random, 3)
    controls = controls[:2, :13]
    blocks = (controls @ np.ones(3))[..., None]
    found = cleared(blocks, controls, np.zeros(3))
    expected = cleared(blocks, controls[..., :2], np.zeros(2))
    assert found.verdict == USED and found.z.shape == (3,)
    np.testing.assert_array_equal(found.blocks, expected.blocks)


def test_a_lone_walker_is_folded_along_its_blocks():
    random = np.random.default_rng(5)
    controls = correlated_controls(random, 2, (200, 1))
    blocks = controls @ np.ones((2, 1)) + 0.1 * random.standard_normal((200, 1, 1))
    found = cleared(blocks, controls, np.zeros(2))
    assert found.verdict == USED
    assert found.blocks.std() < 0.12


def test_z_of_few_samples_has_the_tails_of_a_normal_deviate():
    z = control_z(np.random.default_rng(6).standard_normal((6, 20000)))
    assert stats.kstest(z, "norm").pvalue > 1e-3
    raw = np.random.default_rng(6).standard_normal((6, 20000))
    t = raw.mean(axis=0) / raw.std(axis=0, ddof=1) * np.sqrt(6.0)
    assert stats.kstest(t, "norm").pvalue < 1e-6


def pulls(clear, n_controls, n_seeds=400, walkers=12):
    """Deviations of cleared means from the true one, zero, in errors from the scatter over walkers."""
    found = []
    for seed in range(n_seeds):
        random = np.random.default_rng(seed)
        controls = correlated_controls(random, n_controls, (8, walkers))
        blocks = (controls.sum(axis=-1) + random.standard_normal((8, walkers)))[..., None]
        samples = clear(blocks, controls)[..., 0].ravel()
        t = samples.mean() / samples.std(ddof=1) * np.sqrt(len(samples))
        found.append(np.sign(t) * stats.norm.isf(stats.t.sf(abs(t), len(samples) - 1)))
    return found


def all_at_once(blocks, controls):
    """Least squares on the blocks that are cleared."""
    flat, design = blocks.reshape(-1, 1), controls.reshape(-1, controls.shape[-1])
    beta = np.linalg.lstsq(design - design.mean(axis=0), flat - flat.mean(), rcond=None)[0]
    return (flat - design @ beta).reshape(blocks.shape)


def test_errors_after_regression_are_honest():
    require_unit_pulls(pulls(lambda x, c: cleared(x, c, np.zeros(8)).blocks, 8))
    # The same blocks for fit and use: many controls for few blocks make the errors too small.
    with pytest.raises(AssertionError):
        require_unit_pulls(pulls(all_at_once, 24))


@pytest.mark.parametrize("n_electrons", [4, 20, 50, 400])
def test_widths_fit_the_cell(n_electrons):
    for tau in (1j, complex(0.5, 0.75**0.5), complex(-0.3, 4.0)):
        side = np.sqrt(6.0 * np.pi * n_electrons / tau.imag)
        tables = stein_tables(tau, side, n_electrons)
        assert edge_bias(tau, side, n_electrons, tables.width_sq) <= 1e-6
        assert 1 <= tables.n_controls <= len(POWERS)
        if n_electrons >= 50 and tau.imag < 2.0:
            assert tables.width_sq == pytest.approx(4.5)
            assert tables.n_controls == len(POWERS)
        if n_electrons <= 20:
            # The cell sets the bound, and one step wider would pass it.
            assert edge_bias(tau, side, n_electrons, tables.width_sq / 0.98) > 1e-6
