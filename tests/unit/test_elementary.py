"""Elementary functions and random numbers on eight lanes against mpmath, numpy, scipy and plain integers."""

import math

import mpmath
import numpy as np
import pytest
from scipy import stats

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.elementary import cosine_sine_of_turns, exponential, next_uniform, split_exponent
from mcgeo.kernels.lanes import LANES, float_from_integer, load, store
from tests.exact.xoshiro import xoshiro

MASK = 2**64 - 1


@kernel
def exponentials(x, out):
    for i in range(x.shape[0]):
        store(out, i, exponential(load(x, i)))


@kernel
def cosines_and_sines(x, cosines, sines):
    for i in range(x.shape[0]):
        c, s = cosine_sine_of_turns(load(x, i))
        store(cosines, i, c)
        store(sines, i, s)


@kernel
def splits(x, mantissas, exponents):
    for i in range(x.shape[0]):
        mantissa, exponent = split_exponent(load(x, i))
        store(mantissas, i, mantissa)
        store(exponents, i, float_from_integer(exponent))


@kernel
def uniforms(words, out):
    s0, s1, s2, s3 = load(words, 0), load(words, 1), load(words, 2), load(words, 3)
    for i in range(out.shape[0]):
        u, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
        store(out, i, u)
    store(words, 0, s0)
    store(words, 1, s1)
    store(words, 2, s2)
    store(words, 3, s3)


def rows(values):
    """An array of shape (n, 8) that holds the values, the last one repeated."""
    values = np.asarray(values, dtype=float)
    return np.concatenate([values, np.full(-len(values) % LANES, values[-1])]).reshape(-1, LANES)


def largest_error(found, exact, unit):
    """Largest deviation from exact (mpmath) values in units of the spacing of floats at ``unit``."""
    deviations = [float(abs(mpmath.mpf(float(f)) - e)) for f, e in zip(found, exact, strict=True)]
    return float(np.max(np.array(deviations) / np.spacing(np.abs(unit))))


def test_exponential():
    x = rows(np.concatenate([
        np.random.default_rng(1).uniform(-700.0, 700.0, 3000), np.random.default_rng(2).uniform(-2.0, 2.0, 1500),
        [0.0, -0.0, 700.0, -700.0, 1e-300, -1e-17, 0.5 * math.log(2.0), -0.5 * math.log(2.0)],
    ]))  # fmt: skip
    found = np.empty_like(x)
    exponentials(x, found)
    with mpmath.workdps(40):
        exact = [mpmath.exp(mpmath.mpf(float(v))) for v in x.ravel()]
        error = largest_error(found.ravel(), exact, np.array([float(e) for e in exact]))
    assert error < 1.0
    np.testing.assert_array_equal(found[x == 0.0], 1.0)


def test_exponential_is_held_at_its_ends():
    x = rows([701.0, 1e300, math.inf, -701.0, -1e300, -math.inf])
    found = np.empty_like(x)
    exponentials(x, found)
    np.testing.assert_allclose(found[0, :3], math.exp(700.0), rtol=1e-15)
    np.testing.assert_allclose(found[0, 3:6], math.exp(-700.0), rtol=1e-15)


@pytest.mark.parametrize("largest", [0.5, 1.0, 100.0, 2.0**39])
def test_cosine_and_sine(largest):
    random = np.random.default_rng(3).uniform(-largest, largest, 2000)
    special = np.concatenate([np.arange(-8, 9) / 8.0, np.arange(-4, 5) / 4.0 + 1e-9, [1e-30, -1e-200]])
    x = rows(np.concatenate([random, special[np.abs(special) <= largest]]))
    cosines, sines = np.empty_like(x), np.empty_like(x)
    cosines_and_sines(x, cosines, sines)
    with mpmath.workdps(60):
        half_turns = [2 * mpmath.mpf(float(v)) for v in x.ravel()]
        # A sine is good relative to itself, also beside its zeros; a cosine relative to one.
        cosine_error = largest_error(cosines.ravel(), [mpmath.cospi(h) for h in half_turns], np.array(0.75))
        exact = [mpmath.sinpi(h) for h in half_turns]
        sine_error = largest_error(sines.ravel(), exact, np.array([float(e) for e in exact]))
    assert cosine_error < 2.5
    assert sine_error < 2.5


def test_whole_and_half_turns_are_exact():
    x = rows(np.arange(-8.0, 8.0) / 2.0)
    cosines, sines = np.empty_like(x), np.empty_like(x)
    cosines_and_sines(x, cosines, sines)
    np.testing.assert_array_equal(cosines, np.where(np.mod(x, 1.0) == 0.0, 1.0, -1.0))
    np.testing.assert_array_equal(sines, 0.0)


def test_split_exponent():
    random = np.random.default_rng(4)
    x = rows(np.concatenate([
        random.uniform(1.0, 2.0, 500) * 2.0 ** random.integers(-1022, 1023, 500),
        [1.0, 2.0, np.nextafter(2.0, 1.0), np.finfo(float).tiny, np.finfo(float).max],
    ]))  # fmt: skip
    mantissas, exponents = np.empty_like(x), np.empty_like(x)
    splits(x, mantissas, exponents)
    expected, powers = np.frexp(x)
    np.testing.assert_array_equal(mantissas, 2.0 * expected)
    np.testing.assert_array_equal(exponents, powers - 1.0)


def test_zero_splits_into_a_number_too_small_to_accept():
    x = np.zeros((1, LANES))
    mantissas, exponents = np.empty_like(x), np.empty_like(x)
    splits(x, mantissas, exponents)
    np.testing.assert_array_equal(mantissas, 1.0)
    np.testing.assert_array_equal(exponents, -1023.0)


def test_plain_generator_gives_the_published_numbers():
    # First outputs from the state (1, 2, 3, 4), from memory.
    generator = xoshiro([1, 2, 3, 4])
    assert [next(generator)[0] for _ in range(4)] == [41943041, 58720359, 3588806011781223, 3591011842654386]


def test_uniforms_are_those_of_the_plain_generator():
    words = np.random.default_rng(5).integers(0, 2**64, (4, LANES), dtype=np.uint64)
    words[:, 0] = [1, 2, 3, 4]
    words[:, 1] = MASK
    plain = [xoshiro(words[:, lane].tolist()) for lane in range(LANES)]
    found = np.empty((500, LANES))
    uniforms(words, found)
    for lane in range(LANES):
        pairs = [next(plain[lane]) for _ in range(500)]
        # Python divides integers exactly: 53 bits fit a float.
        assert found[:, lane].tolist() == [(result >> 11) / 2**53 for result, _ in pairs]
        assert tuple(int(w) for w in words[:, lane]) == pairs[-1][1]


def is_uniform(values):
    """Kolmogorov-Smirnov, and chi squared of successive pairs on a 16 x 16 grid."""
    assert stats.kstest(values, "uniform").pvalue > 1e-3
    cells = (16 * values).astype(int)
    pairs = np.bincount(16 * cells[:-1:2] + cells[1::2], minlength=256)
    assert stats.chisquare(pairs).pvalue > 1e-3


@pytest.fixture(scope="module")
def numbers():
    words = np.random.default_rng(6).integers(0, 2**64, (4, LANES), dtype=np.uint64)
    out = np.empty((40000, LANES))
    uniforms(words, out)
    return out


def test_lanes_are_uniform_and_independent(numbers):
    for lane in range(LANES):
        is_uniform(np.ascontiguousarray(numbers[:, lane]))
    # In order of the lanes, neighbours come from two generators.
    is_uniform(numbers[:5000].ravel())
    assert numbers.min() >= 0.0
    assert numbers.max() < 1.0
    correlation = np.corrcoef(numbers.T)[np.triu_indices(LANES, 1)] * math.sqrt(len(numbers))
    assert np.sum(correlation**2) < stats.chi2.ppf(0.999, len(correlation))


def test_the_uniformity_check_sees_faults(numbers):
    values = numbers[:, 0]
    with pytest.raises(AssertionError):
        is_uniform(values**1.03)
    with pytest.raises(AssertionError):
        is_uniform(np.sort(values.reshape(-1, 2), axis=1).ravel())
