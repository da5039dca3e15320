"""Weights and ratios of the Laughlin droplet against 40 digits, and with many electrons."""

import math

import mpmath
import numpy as np
import pytest
from scipy import stats

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.lanes import LANES, float_from_integer, load, store
from mcgeo.kernels.laughlin_disk import distance_product, gaussian_ratio
from mcgeo.states.laughlin_droplet import LaughlinDroplet
from tests.exact.droplet_reference import replayed


@kernel
def ratio_parts(x, y, shift, out):
    """Old and new product and the Gaussian's ratio, each as mantissa and binary exponent; the last electron moves."""
    last = x.shape[0] - 1
    px, py, dx, dy = load(x, last), load(y, last), load(shift, 0), load(shift, 1)
    old, old_power = distance_product(x, y, last, px, py)
    new, new_power = distance_product(x, y, last, px + dx, py + dy)
    gauss, gauss_power = gaussian_ratio(px, py, dx, dy)
    store(out, 0, old)
    store(out, 1, float_from_integer(old_power))
    store(out, 2, new)
    store(out, 3, float_from_integer(new_power))
    store(out, 4, gauss)
    store(out, 5, gauss_power)


def start(droplet, seed):
    random = np.random.default_rng(seed)
    pairs = [droplet.start(random) for _ in range(LANES)]
    x, y = (np.ascontiguousarray(np.transpose(part)) for part in zip(*pairs, strict=True))
    return x, y, random.integers(0, 2**64, (4, LANES), dtype=np.uint64)


def exact_log_weight(exponent, x, y):
    """2m sum log |z_i - z_j| - sum |z|^2/2 at 40 digits."""
    with mpmath.workdps(40):
        z = [mpmath.mpc(*pair) for pair in zip(x.tolist(), y.tolist(), strict=True)]
        pairs = mpmath.fsum(mpmath.log(abs(z[i] - z[j])) for i in range(len(z)) for j in range(i))
        return 2 * exponent * pairs - mpmath.fsum(abs(w) ** 2 for w in z) / 2


@pytest.mark.parametrize(("exponent", "n_electrons"), [(1, 7), (3, 30), (5, 60)])
def test_weight_at_forty_digits(exponent, n_electrons):
    droplet = LaughlinDroplet(exponent, n_electrons)
    x, y, _ = start(droplet, 1)
    found = droplet.log_weight(x, y)
    for lane in range(3):
        exact = float(exact_log_weight(exponent, x[:, lane], y[:, lane]))
        assert found[lane] == pytest.approx(exact, rel=1e-13, abs=1e-10)


@pytest.mark.parametrize("length", [1.0, 20.0, 400.0])
@pytest.mark.parametrize("n_electrons", [2, 57, 130])
def test_change_of_log_weight_at_forty_digits(n_electrons, length):
    exponent = 3
    x, y, _ = start(LaughlinDroplet(exponent, n_electrons), 2)
    shift = np.random.default_rng(3).uniform(-length, length, (2, LANES))
    out = np.empty((6, LANES))
    ratio_parts(x, y, shift, out)
    old, old_power, new, new_power, gauss, gauss_power = out
    found = exponent * (np.log(new / old) + (new_power - old_power) * math.log(2.0))
    found += np.log(gauss) + gauss_power * math.log(2.0)
    assert np.all((gauss > 0.7) & (gauss < 1.5))
    for lane in range(LANES):
        with mpmath.workdps(40):
            z = [mpmath.mpc(*pair) for pair in zip(x[:, lane].tolist(), y[:, lane].tolist(), strict=True)]
            moved = z[-1] + mpmath.mpc(*shift[:, lane].tolist())
            exact = 2 * exponent * mpmath.fsum(mpmath.log(abs((moved - w) / (z[-1] - w))) for w in z[:-1])
            exact -= (abs(moved) ** 2 - abs(z[-1]) ** 2) / 2
        assert found[lane] == pytest.approx(float(exact), rel=1e-13, abs=1e-10)


@pytest.mark.parametrize("n_electrons", [57, 58, 116])
def test_moves_with_several_blocks(n_electrons):
    droplet = LaughlinDroplet(3, n_electrons)
    x, y, words = start(droplet, 7)
    expected_x, expected_y, expected = replayed(3, x, y, words, 5.0, 1, 2, paired=False)
    group = droplet.group(x, y, words)
    group.advance(5.0, 1)
    np.testing.assert_array_equal(group.accepted[0], expected)
    np.testing.assert_allclose(group.a, expected_x, atol=1e-11)
    np.testing.assert_allclose(group.b, expected_y, atol=1e-11)


def test_four_hundred_electrons_stay_in_range():
    droplet = LaughlinDroplet(5, 400)
    x, y, words = start(droplet, 4)
    i, j = np.tril_indices(400, -1)
    log_distance_sq = np.log((x[i] - x[j]) ** 2 + (y[i] - y[j]) ** 2)
    # One electron's product alone is beyond a float.
    assert log_distance_sq[j == 0].sum(axis=0).min() > 1024 * math.log(2.0)
    expected = 5.0 * log_distance_sq.sum(axis=0) - 0.5 * (x**2 + y**2).sum(axis=0)
    np.testing.assert_allclose(droplet.log_weight(x, y), expected, rtol=1e-13)
    group = droplet.group(x, y, words)
    group.advance(droplet.first_step, 4)
    acceptance = group.accepted / (4 * 400 * droplet.proposals_per_sweep)
    assert np.all((acceptance > 0.25) & (acceptance < 0.5))
    # Equilibration from the uniform disk raises the weight by about one per electron.
    assert np.all(droplet.log_weight(group.a, group.b) > expected + 100.0)


def relative_distances(exponent, seed):
    """|z_1 - z_2|^2/4 of two electrons, 40 sweeps apart."""
    droplet = LaughlinDroplet(exponent, 2)
    group = droplet.group(*start(droplet, seed))
    group.advance(droplet.first_step, 100)
    found = []
    for _ in range(1000):
        group.advance(droplet.first_step, 40)
        found.append(((group.a[0] - group.a[1]) ** 2 + (group.b[0] - group.b[1]) ** 2) / 4.0)
    return np.ravel(found)


@pytest.mark.parametrize("exponent", [1, 2, 5])
def test_distance_of_two_electrons(exponent):
    # |z|^(2m) exp(-|z|^2/4): the square over four has a gamma distribution of shape m + 1.
    sample = relative_distances(exponent, 5)
    assert stats.kstest(sample, stats.gamma(exponent + 1).cdf).pvalue > 1e-3
    assert stats.kstest(sample, stats.gamma(exponent + 1.1).cdf).pvalue < 1e-3


def test_droplet_is_described():
    droplet = LaughlinDroplet(3, 10)
    assert (droplet.filling.denominator, droplet.statistics, LaughlinDroplet(2, 10).statistics) == (
        3,
        "fermions",
        "bosons",
    )
    assert droplet.angular_momentum == 135
    x, y, _ = start(droplet, 6)
    assert np.all(np.hypot(x, y) <= droplet.background.radius)
    assert droplet.largest_step == pytest.approx(2.0 * math.sqrt(60.0))
