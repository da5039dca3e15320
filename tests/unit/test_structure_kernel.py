"""Density waves and pair distances of eight walkers against sums written out in numpy."""

import math

import numpy as np
import pytest

from mcgeo.geometry.cell import Cell
from mcgeo.kernels.lanes import LANES
from mcgeo.kernels.pair_histogram import add_pair_counts
from mcgeo.kernels.structure import add_structure_factor, wave_sums, wave_tables

MODULI = [
    1j,
    complex(0.5, math.sqrt(0.75)),
    complex(-0.5, 0.9),
    complex(0.25, 1.0),
    complex(-0.25, 1.7),
    complex(-0.37, 5.0),
    complex(0.5, 12.0),
]


def positions(n_electrons, seed):
    return np.random.default_rng(seed).uniform(-0.5, 0.5, (2, n_electrons, LANES))


def squares(integers, a, b):
    """|sum_j exp(-2 pi i (n1 a + n2 b))|^2, shape (n_waves, 8)."""
    turns = integers[:, 0, None, None] * a + integers[:, 1, None, None] * b
    return np.abs(np.exp(-2j * math.pi * turns).sum(axis=1)) ** 2


def structure_agrees(integers, tau_real, configurations, weights, phases_of=None):
    """Kernel sums over the configurations against the exponentials of ``phases_of`` (default: the same waves)."""
    n_electrons = configurations[0].shape[1]
    tables = wave_tables(integers, tau_real)
    sums = wave_sums(tables, weights, n_electrons)
    expected = np.zeros((len(integers), LANES))
    for a, b in configurations:
        sums.scalar[:] = 0.0
        add_structure_factor(tables, a, b, sums)
        latest = squares(integers if phases_of is None else phases_of, a, b)
        np.testing.assert_allclose(sums.scalar[0], weights @ latest, rtol=1e-11)
        expected += latest
    np.testing.assert_allclose(sums.total, expected, rtol=1e-10, atol=1e-10 * n_electrons)


@pytest.mark.parametrize("tau", MODULI)
@pytest.mark.parametrize("n_electrons", [2, 7, 40])
def test_structure_factor(n_electrons, tau):
    waves = Cell.from_tau(tau, 3 * n_electrons).waves(8.0)
    weights = np.random.default_rng(1).normal(size=len(waves.integers))
    structure_agrees(waves.integers, tau.real, [positions(n_electrons, k) for k in (2, 3)], weights)


def test_waves_in_any_order_and_with_gaps():
    integers = np.array([[3, -5], [0, 1], [0, 4], [2, 2], [3, 5], [1, 0]])
    for tau_real in (-0.5, -0.1, 0.0, 0.5):
        structure_agrees(integers, tau_real, [positions(5, 4)], np.ones(6))


def test_the_structure_check_sees_faults():
    integers = Cell.from_tau(complex(-0.37, 1.0), 15).waves(6.0).integers
    weights = np.ones(len(integers))
    for wrong in (integers * [1, -1], integers[::-1], integers + np.array([0, 1])):
        with pytest.raises(AssertionError):
            structure_agrees(integers, -0.37, [positions(5, 5)], weights, wrong)


def distances_by_images(cell, a, b):
    """Shortest distances of all pairs, shape (n_pairs, 8), by looking at 7 x 7 images of each."""
    i, j = np.tril_indices(len(a), -1)
    fractions = np.stack([a[i] - a[j], b[i] - b[j]], axis=-1)
    shifts = np.array([(s, t) for s in range(-3, 4) for t in range(-3, 4)])
    return np.linalg.norm((fractions[..., None, :] + shifts) @ cell.vectors, axis=-1).min(axis=-1)


def histogram_agrees(cell, a, b, width, n_bins, distances=distances_by_images):
    counts = np.zeros((n_bins, LANES), dtype=np.int64)
    for _ in range(2):
        add_pair_counts(a, b, cell.tau.real, cell.tau.imag, cell.side, width, counts)
    exact = distances(cell, a, b)
    edges = width * np.arange(n_bins + 1)
    expected = np.stack([2 * np.histogram(exact[:, lane], edges)[0] for lane in range(LANES)], axis=1)
    # numpy counts the last edge in; no distance lies within rounding of an edge.
    assert np.abs(exact[..., None] - edges).min() > 1e-12
    np.testing.assert_array_equal(counts, expected)
    return counts


@pytest.mark.parametrize("tau", MODULI)
@pytest.mark.parametrize("width", [0.1, 0.37])
def test_pair_histogram(width, tau):
    cell = Cell.from_tau(tau, 90)
    n_bins = int(cell.largest_radius / width)
    counts = histogram_agrees(cell, *positions(30, 6), width, n_bins)
    # Uniform electrons: the chance of a pair within the last edge is the circle's part of the cell.
    part = math.pi * (n_bins * width) ** 2 / cell.area
    n_pairs = LANES * 30 * 29 // 2
    assert counts.sum() / 2 == pytest.approx(part * n_pairs, abs=5.0 * math.sqrt(part * n_pairs))


def without_images(cell, a, b):
    i, j = np.tril_indices(len(a), -1)
    return np.linalg.norm(np.stack([a[i] - a[j], b[i] - b[j]], axis=-1) @ cell.vectors, axis=-1)


def test_the_histogram_check_sees_a_missing_image_and_too_many_bins():
    cell = Cell.from_shape("hexagonal", 90)
    a, b = positions(30, 7)
    n_bins = int(cell.largest_radius / 0.1)
    with pytest.raises(AssertionError):
        histogram_agrees(cell, a, b, 0.1, n_bins, without_images)
    with pytest.raises(AssertionError):
        histogram_agrees(cell, a, b, 0.1, 2 * n_bins)
