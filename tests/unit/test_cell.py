"""Cells and frames against brute force over lattice sums."""

import cmath
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mcgeo.errors import GeometryError
from mcgeo.geometry.cell import Cell, lattice_points
from mcgeo.geometry.frame import TorusFrame
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric

examples = settings(max_examples=60, deadline=None, derandomize=True, database=None)
moduli = st.builds(complex, st.floats(-8.0, 8.0), st.floats(0.05, 6.0))
reduced_moduli = [
    1j, complex(0.5, math.sqrt(0.75)), complex(-0.5, 1.3), 4j, cmath.exp(1.25j), cmath.exp(1.9j), complex(0.31, 1.0),
]  # fmt: skip


def images(cell, reach):
    """All lattice points with integer coordinates up to ``reach``, shape (n, 2)."""
    shifts = np.array([(i, j) for i in range(-reach, reach + 1) for j in range(-reach, reach + 1)])
    return shifts @ cell.vectors


def shortest(cell, displacements, reach=12):
    """Length of the shortest image of each displacement, by looking at all of them."""
    return np.min(np.linalg.norm(displacements[:, None] + images(cell, reach), axis=-1), axis=1)


@examples
@given(moduli, st.integers(1, 500))
def test_area_and_modulus(tau, n_flux):
    cell = Cell.from_tau(tau, n_flux)
    (x1, y1), (x2, y2) = cell.vectors
    assert cell.area == pytest.approx(x1 * y2 - x2 * y1, rel=1e-12)
    assert cell.area == pytest.approx(2.0 * math.pi * n_flux, rel=1e-12)
    assert cell.n_flux == n_flux
    assert cell.tau == pytest.approx(tau, rel=1e-12)
    assert (x1, y1) == pytest.approx((cell.side, 0.0))


@pytest.mark.parametrize(("shape", "angle"), [("square", 90.0), ("hexagonal", 60.0)])
def test_named_shapes(shape, angle):
    first, second = Cell.from_shape(shape, 30).vectors
    assert np.linalg.norm(first) == pytest.approx(np.linalg.norm(second), rel=1e-14)
    cosine = first @ second / np.linalg.norm(first) / np.linalg.norm(second)
    assert math.degrees(math.acos(cosine)) == pytest.approx(angle)


def reduction_is_right(cell, reduced, m):
    """One lattice, one orientation, tau in the fundamental domain."""
    tau = complex(*reduced.vectors[1]) / complex(*reduced.vectors[0])
    assert m.dtype == np.int64
    assert m[0, 0] * m[1, 1] - m[0, 1] * m[1, 0] == 1
    np.testing.assert_allclose(m @ cell.vectors, reduced.vectors, rtol=1e-12, atol=1e-12 * cell.side)
    assert abs(tau.real) <= 0.5 + 1e-9
    assert abs(tau) >= 1.0 - 1e-9


@examples
@given(moduli, st.floats(0.0, 3.0), st.floats(-2.0, 2.0))
def test_reduction(tau, stretch, angle):
    cell = Cell.from_tau(tau, 21).mapped(UnimodularMetric(stretch, angle).linear_map)
    assert cell.area == pytest.approx(42.0 * math.pi, rel=1e-10)
    reduced, m = cell.reduced()
    reduction_is_right(cell, reduced, m)
    # The first vector of a reduced basis is a shortest one: no lattice point lies closer than it.
    assert np.linalg.norm(lattice_points(cell.vectors, 1.001 * reduced.side), axis=1).min() == pytest.approx(
        reduced.side, rel=1e-9
    )


def test_the_reduction_check_sees_faults():
    cell = Cell.from_tau(complex(2.3, 0.2), 12)
    reduced, m = cell.reduced()
    for broken_cell, broken_m in [(cell, np.eye(2, dtype=np.int64)), (reduced, m[::-1]), (reduced, 2 * m)]:
        with pytest.raises(AssertionError):
            reduction_is_right(cell, broken_cell, broken_m)


@pytest.mark.parametrize("metric", [ISOTROPIC, UnimodularMetric(1.2, 0.4), UnimodularMetric(2.5, -1.1)])
@pytest.mark.parametrize("tau", [1j, complex(-0.5, 0.9), complex(2.3, 0.4)])
def test_waves_are_one_half_of_all(tau, metric):
    cell, q_max = Cell.from_tau(tau, 9), 4.0
    waves = cell.waves(q_max, metric)
    phases = waves.vectors @ cell.vectors.T
    np.testing.assert_allclose(phases, 2.0 * math.pi * waves.integers, atol=1e-9)
    expected = set()
    inverse = np.linalg.inv(metric.matrix)
    for n1 in range(-60, 61):
        for n2 in range(-60, 61):
            q = 2.0 * math.pi * np.linalg.solve(cell.vectors, [n1, n2])
            if (n1, n2) != (0, 0) and q @ inverse @ q < q_max**2:
                expected.add((n1, n2))
    found = {(int(n1), int(n2)) for n1, n2 in waves.integers}
    assert len(found) == len(waves.integers)
    assert found | {(-n1, -n2) for n1, n2 in found} == expected
    assert not found & {(-n1, -n2) for n1, n2 in found}
    assert max(max(abs(n1), abs(n2)) for n1, n2 in expected) < 60
    norm = metric.wavevector_norm_sq(waves.vectors)
    assert np.all(np.diff(norm) > -1e-8)


@pytest.mark.parametrize("tau", [*reduced_moduli, complex(3.4, 0.3), complex(-0.9, 0.15)])
def test_minimum_image(tau):
    cell = Cell.from_tau(tau, 15)
    displacements = np.random.default_rng(3).uniform(-2.0, 2.0, (200, 2)) @ cell.vectors
    nearest = cell.minimum_image(displacements)
    np.testing.assert_allclose(np.linalg.norm(nearest, axis=1), shortest(cell, displacements), rtol=1e-9)
    turns = (nearest - displacements) @ np.linalg.inv(cell.vectors)
    np.testing.assert_allclose(turns, np.rint(turns), atol=1e-9)
    assert cell.minimum_image(displacements.reshape(4, 50, 2)).shape == (4, 50, 2)


def folded_lengths(cell, fractions):
    """Distance by folding first b, then the coordinate along L1."""
    b = fractions[:, 1] - np.rint(fractions[:, 1])
    x = fractions[:, 0] + b * cell.tau.real
    x = x - np.rint(x)
    return cell.side * np.hypot(x, b * cell.tau.imag)


@pytest.mark.parametrize("tau", reduced_moduli)
def test_largest_radius_of_folding(tau):
    cell = Cell.from_tau(tau, 15)
    fractions = np.random.default_rng(4).uniform(-1.0, 1.0, (4000, 2))
    exact, folded = shortest(cell, fractions @ cell.vectors, 3), folded_lengths(cell, fractions)
    inside = exact < cell.largest_radius
    assert inside.sum() > 500
    np.testing.assert_allclose(folded[inside], exact[inside], rtol=1e-9)
    assert np.all(folded[~inside] >= cell.largest_radius)


def test_largest_radius_is_no_smaller_than_need_be():
    # In the hexagonal cell of side L the height is 0.866 L: a pair farther apart than half of it may be missed.
    cell = Cell.from_shape("hexagonal", 15)
    assert cell.largest_radius == pytest.approx(0.5 * math.sqrt(0.75) * cell.side)
    fractions = np.random.default_rng(5).uniform(-1.0, 1.0, (4000, 2))
    exact, folded = shortest(cell, fractions @ cell.vectors, 3), folded_lengths(cell, fractions)
    assert exact[folded > exact + 1e-9].min() < 1.1 * cell.largest_radius


@pytest.mark.parametrize("vectors", [[[1.0, 0.0], [0.3, 0.8]], [[2.0, 1.0], [7.0, 4.0]], [[0.1, 0.0], [0.0, 5.0]]])
def test_lattice_points(vectors):
    vectors = np.array(vectors)
    integers = np.array([(i, j) for i in range(-60, 61) for j in range(-60, 61) if (i, j) != (0, 0)])
    points = integers @ vectors
    expected = points[np.linalg.norm(points, axis=1) <= 5.01]
    found = lattice_points(vectors, 5.01)
    order = [np.lexsort(np.round(p, 9).T) for p in (expected, found)]
    np.testing.assert_allclose(found[order[1]], expected[order[0]], atol=1e-9)


@pytest.mark.parametrize("metric", [ISOTROPIC, UnimodularMetric(1.4, 0.7), UnimodularMetric(3.0, -0.2)])
@pytest.mark.parametrize("tau", [1j, complex(0.4, 1.2)])
def test_frame(tau, metric):
    cell = Cell.from_tau(tau, 18)
    frame = TorusFrame.of(cell, metric)
    reduction_is_right(cell.mapped(metric.linear_map), frame.isotropic, np.rint(
        frame.lab.vectors @ np.linalg.inv(cell.vectors)).astype(np.int64))  # fmt: skip
    np.testing.assert_allclose(frame.lab.vectors @ metric.linear_map.T, frame.isotropic.vectors, atol=1e-10)
    a, b = np.random.default_rng(1).uniform(-0.5, 0.5, (2, 50))
    lab = frame.positions(a, b)
    x, y = (np.outer(a, frame.isotropic.vectors[0]) + np.outer(b, frame.isotropic.vectors[1])).T
    # Lengths in the state's own coordinates are lengths in the metric in the lab.
    np.testing.assert_allclose(metric.position_norm_sq(lab), x**2 + y**2, rtol=1e-10)
    waves, inner = frame.waves(5.0), frame.isotropic.waves(5.0)
    np.testing.assert_array_equal(waves.integers, inner.integers)
    np.testing.assert_allclose(metric.wavevector_norm_sq(waves.vectors), np.sum(inner.vectors**2, axis=1), rtol=1e-9)
    # A phase q.r is the same in both.
    phase = lab @ waves.vectors.T
    np.testing.assert_allclose(phase, np.stack([x, y], axis=-1) @ inner.vectors.T, atol=1e-8)
    np.testing.assert_allclose(phase, 2.0 * math.pi * np.stack([a, b], axis=-1) @ waves.integers.T, atol=1e-8)


def test_too_long_a_cell_is_refused_by_its_reduced_modulus():
    frame = TorusFrame.of(Cell.from_tau(30j, 6))
    with pytest.raises(GeometryError, match=r"Im\(tau\) in the state's metric is 30; at most 28 works"):
        frame.require_tau_below(28.0)
    # The metric that is short along the long side undoes it.
    TorusFrame.of(Cell.from_tau(30j, 6), UnimodularMetric(math.log(30.0))).require_tau_below(1.0 + 1e-9)
    TorusFrame.of(Cell.from_tau(1j / 30, 6), UnimodularMetric(-math.log(30.0))).require_tau_below(1.0 + 1e-9)


@pytest.mark.parametrize(
    "vectors", [[[1.0, 0.0], [0.0, -1.0]], [[1.0, 0.0], [2.0, 0.0]], [[math.nan, 0.0], [0.0, 1.0]], [[1.0, 2.0]]]
)
def test_vectors_refused(vectors):
    with pytest.raises(GeometryError, match="counter-clockwise"):
        Cell(np.array(vectors))


def test_moduli_and_shapes_refused():
    for tau, n_flux in [(complex(1.0, 0.0), 3), (complex(0.0, -1.0), 3), (1j, 0), (complex(0.0, math.nan), 3)]:
        with pytest.raises(GeometryError, match="at least one flux quantum"):
            Cell.from_tau(tau, n_flux)
    with pytest.raises(GeometryError, match="hexagonal or square, not 'round'"):
        Cell.from_shape("round", 3)


def test_vectors_cannot_be_changed():
    cell = Cell.from_shape("square", 3)
    with pytest.raises(ValueError, match="read-only"):
        cell.vectors[0, 0] = 1.0
