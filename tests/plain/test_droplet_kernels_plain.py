"""Kernels of droplets on tiny systems against numpy; made to run with the compiler switched off and on."""

import math

import numpy as np
import pytest

from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.kernels import laughlin_disk, moore_read_disk
from mcgeo.kernels.droplet_counts import (
    add_pair_counts,
    add_radial_counts,
    add_second_moments,
    coulomb_sums,
)
from mcgeo.kernels.lanes import LANES
from mcgeo.states.laughlin_droplet import LaughlinDroplet
from mcgeo.states.moore_read_droplet import MooreReadDroplet
from tests.exact.droplet_reference import log_weight, replayed

# An ordinary step, and one that mostly throws electrons far out of the droplet.
STEPS = [4.0, 300.0]


def walkers(n_electrons, seed):
    random = np.random.default_rng(seed)
    x, y = random.normal(0.0, 2.0, (2, n_electrons, LANES))
    return x, y, random.integers(0, 2**64, (4, LANES), dtype=np.uint64)


@pytest.mark.parametrize("exponent", [1, 3])
def test_laughlin_weight(exponent):
    x, y, _ = walkers(4, 1)
    expected = log_weight(exponent, x, y, paired=False)
    np.testing.assert_allclose(LaughlinDroplet(exponent, 4).log_weight(x, y), expected, rtol=1e-13)


@pytest.mark.parametrize("exponent", [1, 2])
def test_moore_read_weight(exponent):
    x, y, _ = walkers(10, 2)
    expected = log_weight(exponent, x, y, paired=True)
    np.testing.assert_allclose(MooreReadDroplet(exponent, 10).log_weight(x, y), expected, rtol=1e-12)


def laughlin_moves_agree(exponent, step, replayed_exponent):
    x, y, words = walkers(4, 3)
    expected_x, expected_y, expected = replayed(replayed_exponent, x, y, words, step, 3, 2, paired=False)
    accepted = np.zeros((1, LANES))
    laughlin_disk.advance(exponent, x, y, words, accepted, step, 3, 2)
    np.testing.assert_array_equal(accepted[0], expected)
    np.testing.assert_allclose(x, expected_x, atol=1e-12)
    np.testing.assert_allclose(y, expected_y, atol=1e-12)


@pytest.mark.parametrize("step", STEPS)
@pytest.mark.parametrize("exponent", [1, 3])
def test_laughlin_moves(exponent, step):
    laughlin_moves_agree(exponent, step, exponent)


def test_laughlin_moves_of_another_exponent_differ():
    with pytest.raises(AssertionError):
        laughlin_moves_agree(3, 4.0, 2)


@pytest.mark.parametrize("step", STEPS)
@pytest.mark.parametrize("exponent", [1, 2])
def test_moore_read_moves(exponent, step):
    x, y, words = walkers(4, 4)
    expected_x, expected_y, expected = replayed(exponent, x, y, words, step, 2, 3, paired=True)
    along, inverse = np.zeros((2, LANES, 1, LANES)), np.zeros((2, LANES, 4, LANES))
    moore_read_disk.refresh_inverses(x, y, *along, *inverse, np.empty(LANES))
    accepted = np.zeros((1, LANES))
    moore_read_disk.advance(exponent, x, y, *along, *inverse, words, accepted, step, 2, 3)
    np.testing.assert_array_equal(accepted[0], expected)
    np.testing.assert_allclose(x, expected_x, atol=1e-12)
    np.testing.assert_allclose(y, expected_y, atol=1e-12)
    z = (expected_x + 1j * expected_y).T
    matrix = np.zeros((LANES, 4, 4), dtype=complex)
    i, j = np.nonzero(~np.eye(4, dtype=bool))
    matrix[:, i, j] = 1.0 / (z[:, i] - z[:, j])
    made = inverse[0, :, :, :4] + 1j * inverse[1, :, :, :4]
    np.testing.assert_allclose(made, np.linalg.inv(matrix), atol=1e-9)


def test_coulomb_sums():
    x, y, _ = walkers(5, 5)
    metric = UnimodularMetric(0.7, 0.3)
    out = np.empty((3, LANES))
    coulomb_sums(x, y, metric.inverse_matrix, 4.0, out)
    i, j = np.tril_indices(5, -1)
    separation = np.stack([x[i] - x[j], y[i] - y[j]], axis=-1)
    lab = np.linalg.solve(metric.linear_map, separation[..., None])[..., 0]
    for row, vectors in ((0, separation), (1, lab)):
        distance = np.linalg.norm(vectors, axis=-1)
        close = 0.5 if row == 0 else 0.5 * math.exp(-0.35)
        far = np.all(distance > close, axis=0)
        assert far.sum() > 2
        np.testing.assert_allclose(out[row, far], (1.0 / distance[:, far]).sum(axis=0), rtol=1e-14)


def test_moments_and_counts():
    x, y, _ = walkers(5, 6)
    moments, counts = np.ones((3, LANES)), np.zeros((8, LANES), dtype=np.int64)
    add_second_moments(x, y, moments)
    add_radial_counts(x, y, 0.5, counts)
    np.testing.assert_allclose(
        moments - 1.0, [(x * x).sum(axis=0), (y * y).sum(axis=0), (x * y).sum(axis=0)], rtol=1e-13
    )
    edges = [*np.arange(0.0, 4.0, 0.5), np.inf]
    for lane in range(LANES):
        expected = np.histogram(np.hypot(x[:, lane], y[:, lane]), edges)[0]
        np.testing.assert_array_equal(counts[:, lane], expected)


def test_pair_counts():
    x, y, _ = walkers(6, 7)
    counts = np.ones((9, LANES), dtype=np.int64)
    add_pair_counts(x, y, 0.5, counts)
    i, j = np.tril_indices(6, -1)
    edges = [*np.arange(0.0, 4.5, 0.5), np.inf]
    for lane in range(LANES):
        expected = np.histogram(np.hypot(x[i, lane] - x[j, lane], y[i, lane] - y[j, lane]), edges)[0]
        np.testing.assert_array_equal(counts[:, lane] - 1, expected)
    assert counts[-1].sum() > LANES
