"""Kernels on tiny systems against numpy; made to run with the compiler switched off (NUMBA_DISABLE_JIT=1) and on."""

import math

import numpy as np
import pytest

from mcgeo.geometry.cell import Cell
from mcgeo.kernels import determinant, lanes
from mcgeo.kernels._jit import kernel
from mcgeo.kernels.elementary import cosine_sine_of_turns, exponential, next_uniform, split_exponent
from mcgeo.kernels.lanes import LANES
from mcgeo.kernels.laughlin_torus import advance, laughlin_torus_tables, log_weights, refresh_phases
from mcgeo.kernels.pair_histogram import add_pair_counts
from mcgeo.kernels.structure import add_structure_factor, wave_sums, wave_tables
from tests.exact.torus_theta import log_pair_factor, log_weight
from tests.exact.xoshiro import uniforms

TAU = complex(-0.3, 1.1)


def positions(n_electrons, seed):
    return np.random.default_rng(seed).uniform(-0.5, 0.5, (2, n_electrons, LANES))


@kernel
def lane_arithmetic(x, y, out):
    a, b = lanes.load(x, 0), lanes.load(y, 0)
    lanes.store(out, 0, a + b * 2.0 - 1.0 / b)
    lanes.store(out, 1, lanes.select(a < b, a, lanes.splat(7.0)))
    lanes.store(out, 2, lanes.round_to_integer(a * 10.0))
    bits = lanes.bits_from_float(a)
    high = lanes.shift_left(lanes.shift_right(bits, 40), 40)
    lanes.store(out, 3, lanes.float_from_bits(high | (bits & lanes.splat_bits(0))))


@kernel
def elementary_functions(x, words, out):
    value = lanes.load(x, 0)
    lanes.store(out, 0, exponential(value))
    cosine, sine = cosine_sine_of_turns(value)
    lanes.store(out, 1, cosine)
    lanes.store(out, 2, sine)
    mantissa, exponent = split_exponent(value)
    lanes.store(out, 3, mantissa)
    lanes.store(out, 4, lanes.float_from_integer(exponent))
    s0, s1, s2, s3 = lanes.load(words, 0), lanes.load(words, 1), lanes.load(words, 2), lanes.load(words, 3)
    for i in range(10):
        u, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
        lanes.store(out, 5 + i, u)


def test_lane_arithmetic():
    x, y = np.random.default_rng(1).uniform(0.5, 2.0, (2, 1, LANES))
    out = np.empty((4, LANES))
    lane_arithmetic(x, y, out)
    np.testing.assert_allclose(out[0], (x + 2.0 * y - 1.0 / y)[0], rtol=1e-15)
    np.testing.assert_array_equal(out[1], np.where(x < y, x, 7.0)[0])
    np.testing.assert_array_equal(out[2], np.rint(10.0 * x)[0])
    np.testing.assert_array_equal(out[3], ((x.view(np.uint64) >> 40) << 40).view(float)[0])


def test_elementary_functions():
    random = np.random.default_rng(2)
    x, words = random.uniform(0.01, 30.0, (1, LANES)), random.integers(0, 2**64, (4, LANES), dtype=np.uint64)
    out = np.empty((15, LANES))
    elementary_functions(x, words, out)
    np.testing.assert_allclose(out[0], np.exp(x[0]), rtol=1e-15)
    np.testing.assert_allclose(out[1], np.cos(2.0 * math.pi * x[0]), atol=1e-13)
    np.testing.assert_allclose(out[2], np.sin(2.0 * math.pi * x[0]), atol=1e-13)
    np.testing.assert_array_equal(out[3] * 2.0 ** out[4], x[0])
    assert np.all((out[3] >= 1.0) & (out[3] < 2.0))
    for lane in range(LANES):
        stream = uniforms(words[:, lane].tolist())
        assert out[5:, lane].tolist() == [next(stream) for _ in range(10)]


@pytest.mark.parametrize("tau", [TAU, 6j])
@pytest.mark.parametrize("exponent", [1, 3])
def test_log_weights(exponent, tau):
    a, b = positions(4, 3)
    out = np.empty(LANES)
    log_weights(laughlin_torus_tables(exponent, tau, 5.0), a, b, out)
    expected = log_weight(exponent, a, b, tau)
    np.testing.assert_allclose(out - out[0], expected - expected[0], atol=1e-10)


def test_moves():
    side, step, exponent = Cell.from_tau(TAU, 9).side, 4.0, 3
    a, b = positions(3, 4)
    words = np.random.default_rng(5).integers(0, 2**64, (4, LANES), dtype=np.uint64)
    tables = laughlin_torus_tables(exponent, TAU, side)
    phases, sums = np.empty((6, LANES)), np.empty((4 * len(tables.far) + 1, LANES))
    refresh_phases(tables, a, b, phases, sums)
    w = np.exp(2j * math.pi * (a + b * TAU))
    np.testing.assert_allclose(phases[::2] + 1j * phases[1::2], w, rtol=1e-13)
    np.testing.assert_allclose(sums[0] + 1j * sums[1], w.sum(axis=0), rtol=1e-12)
    np.testing.assert_allclose(sums[2] + 1j * sums[3], (1.0 / w).sum(axis=0), rtol=1e-12)
    np.testing.assert_allclose(sums[-1], b.sum(axis=0), atol=1e-14)
    expected_a, expected_b = a.copy(), b.copy()
    streams = [uniforms(words[:, lane].tolist()) for lane in range(LANES)]
    n_accepted = np.zeros(LANES)
    for i in range(3):
        for array in (expected_a, expected_b):
            array[[i, -1]] = array[[-1, i]]
        for _ in range(2):
            ux, uy, u = np.array([[next(stream) for _ in range(3)] for stream in streams]).T
            shift_b = step * (uy - 0.5) / (side * TAU.imag)
            new_a = expected_a[-1] + step * (ux - 0.5) / side - shift_b * TAU.real
            new_b = expected_b[-1] + shift_b
            ratio = exponent * sum(
                log_pair_factor(new_a - expected_a[j], new_b - expected_b[j], TAU)
                - log_pair_factor(expected_a[-1] - expected_a[j], expected_b[-1] - expected_b[j], TAU)
                for j in range(2)
            )
            accept = u < np.exp(ratio)
            expected_a[-1] = np.where(accept, new_a - np.rint(new_a), expected_a[-1])
            expected_b[-1] = np.where(accept, new_b - np.rint(new_b), expected_b[-1])
            n_accepted += accept
    accepted = np.zeros((1, LANES))
    advance(tables, a, b, phases, sums, words, accepted, step, 1, 2)
    np.testing.assert_array_equal(accepted[0], n_accepted)
    assert 0 < n_accepted.sum() < 6 * LANES
    np.testing.assert_allclose(a, expected_a, atol=1e-12)
    np.testing.assert_allclose(b, expected_b, atol=1e-12)


def test_structure_factor():
    a, b = positions(3, 6)
    integers = Cell.from_tau(TAU, 6).waves(3.0).integers
    tables, weights = wave_tables(integers, TAU.real), np.arange(1.0, 1.0 + len(integers))
    sums = wave_sums(tables, weights, 3)
    add_structure_factor(tables, a, b, sums)
    turns = integers[:, 0, None, None] * a + integers[:, 1, None, None] * b
    expected = np.abs(np.exp(2j * math.pi * turns).sum(axis=1)) ** 2
    np.testing.assert_allclose(sums.total, expected, atol=1e-12)
    np.testing.assert_allclose(sums.scalar[0], weights @ expected, rtol=1e-12)


def test_pair_histogram():
    cell = Cell.from_tau(TAU, 15)
    a, b = positions(5, 7)
    counts = np.zeros((20, LANES), dtype=np.int64)
    width = cell.largest_radius / 20
    add_pair_counts(a, b, TAU.real, TAU.imag, cell.side, width, counts)
    i, j = np.tril_indices(5, -1)
    displacements = np.stack([a[i] - a[j], b[i] - b[j]], axis=-1) @ cell.vectors
    distances = np.linalg.norm(cell.minimum_image(displacements), axis=-1)
    for lane in range(LANES):
        expected = np.histogram(distances[:, lane], width * np.arange(21))[0]
        np.testing.assert_array_equal(counts[:, lane], expected)
    assert counts.sum() > 0


@pytest.mark.parametrize("n", [1, 3, 8, 11])
def test_determinant(n):
    random = np.random.default_rng(8)
    matrix = random.normal(size=(n, n)) + 1j * random.normal(size=(n, n))
    vectors, width = int(determinant.lane_vectors(n)), int(determinant.row_width(n))
    stored = np.zeros((n, width * LANES))
    stored[:, :n], stored[:, vectors * LANES : vectors * LANES + n] = matrix.real, matrix.imag
    found = determinant.log_modulus_of_determinant(stored.reshape(-1, LANES), np.zeros((n, LANES)), n)
    assert found == pytest.approx(np.linalg.slogdet(matrix)[1], abs=1e-12)


def test_singular_matrix():
    stored = np.zeros((2 * int(determinant.row_width(2)), LANES))
    assert determinant.log_modulus_of_determinant(stored, np.zeros((2, LANES)), 2) == -math.inf
