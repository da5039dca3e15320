"""Unimodular metrics against matrices of numpy and scipy and against the definitions."""

import math

import numpy as np
import pytest
import scipy.linalg
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from mcgeo.errors import GeometryError
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric

examples = settings(max_examples=60, deadline=None, derandomize=True, database=None)
stretches = st.floats(0.0, 3.0)
angles = st.floats(-7.0, 7.0)
metrics = st.builds(UnimodularMetric, stretches, angles)
coordinates = st.floats(-2.0, 2.0)


def rotation(angle):
    return np.array([[math.cos(angle), -math.sin(angle)], [math.sin(angle), math.cos(angle)]])


def turn_between(first, second):
    """Angle between two axes, in [0, pi/2]."""
    return abs(math.remainder(first - second, math.pi))


def geodesic_distance(first, second):
    """arccosh(Tr(g1^-1 g2)/2) from the eigenvalues of g1^-1 g2, which are e^d and e^-d."""
    return float(np.log(scipy.linalg.eigh(second, first, eigvals_only=True)[1]))


@examples
@given(stretches, angles)
def test_matrix_is_the_definition(stretch, angle):
    expected = rotation(angle) @ np.diag([math.exp(stretch), math.exp(-stretch)]) @ rotation(angle).T
    metric = UnimodularMetric(stretch, angle)
    np.testing.assert_allclose(metric.matrix, expected, atol=1e-13 * math.exp(stretch))
    np.testing.assert_allclose(metric.inverse_matrix, np.linalg.inv(expected), atol=1e-12 * math.exp(stretch))
    np.testing.assert_allclose(metric.inverse.matrix, metric.inverse_matrix, atol=1e-13 * math.exp(stretch))
    assert np.linalg.det(metric.matrix) == pytest.approx(1.0, abs=1e-15 * math.exp(2 * stretch))


@examples
@given(stretches, angles)
def test_stretch_and_angle_survive_the_matrix(stretch, angle):
    back = UnimodularMetric.from_matrix(7.3 * UnimodularMetric(stretch, angle).matrix)
    assert back.stretch == pytest.approx(stretch, abs=1e-13 * math.exp(2 * stretch))
    assert -math.pi / 2 < back.angle <= math.pi / 2
    assume(stretch > 1e-3)
    assert turn_between(back.angle, angle) < 1e-12 / min(stretch, 1.0)


@examples
@given(stretches, angles)
def test_flat_coordinates(stretch, angle):
    metric = UnimodularMetric(stretch, angle)
    assert metric.flat_coordinates == pytest.approx(
        (stretch * math.cos(2 * angle), stretch * math.sin(2 * angle)), abs=1e-13
    )
    back = UnimodularMetric.from_flat_coordinates(*metric.flat_coordinates)
    np.testing.assert_allclose(back.matrix, metric.matrix, atol=1e-13 * math.exp(stretch))


@pytest.mark.parametrize(
    ("given_pair", "kept"),
    [
        ((-1.0, 0.2), (1.0, 0.2 - math.pi / 2)),
        ((1.0, math.pi), (1.0, 0.0)),
        ((1.0, -math.pi / 2), (1.0, math.pi / 2)),
        ((0.0, 1.0), (0.0, 0.0)),
        ((-0.0, 1.0), (0.0, 0.0)),
    ],
)
def test_one_metric_has_one_name(given_pair, kept):
    metric = UnimodularMetric(*given_pair)
    np.testing.assert_allclose(
        metric.matrix,
        rotation(given_pair[1]) @ np.diag(np.exp([given_pair[0], -given_pair[0]])) @ rotation(given_pair[1]).T,
        atol=1e-15,
    )
    assert (metric.stretch, metric.angle) == pytest.approx(kept, abs=1e-15)


@examples
@given(metrics)
def test_linear_map_is_the_root_of_the_matrix(metric):
    root = scipy.linalg.sqrtm(metric.matrix)
    scale = math.exp(metric.stretch)
    np.testing.assert_allclose(metric.linear_map, root, atol=1e-12 * scale)
    np.testing.assert_allclose(metric.linear_map.T @ metric.linear_map, metric.matrix, atol=1e-14 * scale)
    np.testing.assert_allclose(metric.inverse_linear_map @ root, np.eye(2), atol=1e-12 * scale)
    assert np.linalg.det(metric.linear_map) == pytest.approx(1.0, abs=1e-14 * scale)


@examples
@given(metrics, st.floats(0.0, 2.0 * math.pi))
def test_norms_of_mapped_vectors(metric, direction):
    r = np.array([math.cos(direction), math.sin(direction)])
    scale = math.exp(metric.stretch)
    assert metric.position_norm_sq(r) == pytest.approx(np.sum((metric.linear_map @ r) ** 2), abs=1e-14 * scale)
    # A plane wave q.r keeps its phase when r goes to S r and q to S^-T q.
    q = np.linalg.solve(metric.linear_map.T, r)
    assert metric.wavevector_norm_sq(r) == pytest.approx(np.sum(q**2), abs=1e-12 * scale)
    stack = metric.position_norm_sq(np.array([[r, 2.0 * r]]))
    np.testing.assert_allclose(stack, [[metric.position_norm_sq(r), 4.0 * metric.position_norm_sq(r)]], rtol=1e-12)


@examples
@given(metrics, metrics)
def test_composition_is_undone(frame, inner):
    tolerance = 1e-14 * math.exp(2.0 * frame.stretch + inner.stretch)
    lab = frame.composed_with(inner)
    s = scipy.linalg.sqrtm(frame.matrix)
    np.testing.assert_allclose(lab.matrix, s @ inner.matrix @ s, atol=100 * tolerance)
    np.testing.assert_allclose(lab.relative_to(frame).matrix, inner.matrix, atol=100 * tolerance)
    np.testing.assert_allclose(frame.relative_to(frame).matrix, np.eye(2), atol=100 * tolerance)


@examples
@given(metrics, metrics, metrics)
def test_distance(first, second, third):
    found = first.distance(second)
    trace = np.trace(np.linalg.solve(first.matrix, second.matrix)) / 2.0
    assert math.cosh(found) == pytest.approx(trace, rel=1e-11)
    assert found == pytest.approx(geodesic_distance(first.matrix, second.matrix), abs=1e-6)
    assert second.distance(first) == pytest.approx(found, abs=1e-6)
    assert first.distance(third) <= found + second.distance(third) + 1e-6


@examples
@given(stretches, stretches, angles)
def test_distance_along_one_axis(first, second, angle):
    pair = UnimodularMetric(first, angle), UnimodularMetric(second, angle)
    assert pair[0].distance(pair[1]) == pytest.approx(abs(first - second), abs=1e-12 * math.exp(first + second))


@examples
@given(metrics, coordinates, coordinates)
def test_displaced_by_normal_coordinates(metric, along, across):
    step = math.hypot(along, across)
    moved = metric.displaced(along, across)
    scale = math.exp(2.0 * metric.stretch + step)
    assert metric.distance(moved) == pytest.approx(step, abs=1e-14 * scale * 10)
    root = scipy.linalg.sqrtm(metric.matrix)
    generator = scipy.linalg.expm(np.array([[along, across], [across, -along]]))
    np.testing.assert_allclose(moved.matrix, root @ generator @ root, atol=1e-13 * scale)
    # Half a step and the same again make one step: the path is a geodesic.
    half = metric.displaced(along / 2, across / 2)
    assert metric.distance(half) + half.distance(moved) == pytest.approx(step, abs=1e-6)


@examples
@given(coordinates, coordinates)
def test_displaced_from_the_isotropic_point(along, across):
    assert ISOTROPIC.displaced(along, across).flat_coordinates == pytest.approx((along, across), abs=1e-12)


@examples
@given(metrics, angles)
def test_turned(metric, angle):
    expected = rotation(angle) @ metric.matrix @ rotation(angle).T
    np.testing.assert_allclose(metric.turned(angle).matrix, expected, atol=1e-13 * math.exp(metric.stretch))


@examples
@given(st.floats(0.01, 10.0), st.floats(0.01, 10.0), angles)
def test_mass_tensor_against_its_eigenvectors(first, second, angle):
    assume(abs(math.log(first / second)) > 1e-3)
    tensor = rotation(angle) @ np.diag([first, second]) @ rotation(angle).T
    tensor = 0.5 * (tensor + tensor.T)
    masses, axes = np.linalg.eigh(tensor)
    metric = UnimodularMetric.from_mass_tensor(tensor)
    assert metric.stretch == pytest.approx(0.5 * math.log(masses[1] / masses[0]), abs=1e-10)
    assert turn_between(metric.angle, math.atan2(axes[1, 1], axes[0, 1])) < 1e-9


@pytest.mark.parametrize(("aspect_ratio", "angle"), [(1.0, 0.3), (2.0, 0.0), (7.5, -0.9), (0.25, 0.4)])
def test_semi_axes_of_the_ellipse(aspect_ratio, angle):
    metric = UnimodularMetric.from_aspect_ratio(aspect_ratio, angle)
    direction = angle + math.pi * np.arange(7200) / 7200
    unit = np.stack([np.cos(direction), np.sin(direction)], axis=-1)
    radius = 1.0 / np.sqrt(np.einsum("na,ab,nb->n", unit, metric.matrix, unit))
    assert radius.max() / radius.min() == pytest.approx(metric.aspect_ratio, rel=1e-12)
    assert metric.aspect_ratio == pytest.approx(max(aspect_ratio, 1.0 / aspect_ratio), rel=1e-14)
    # Short along the angle, long across it, area pi.
    assert radius[0] == pytest.approx(aspect_ratio**-0.5, rel=1e-12)
    assert radius[3600] == pytest.approx(aspect_ratio**0.5, rel=1e-12)


def test_angle_in_degrees():
    assert UnimodularMetric(1.0, math.radians(-33.0)).angle_degrees == pytest.approx(-33.0, rel=1e-14)


@pytest.mark.parametrize("bad", [math.nan, math.inf, -math.inf])
def test_a_metric_is_finite(bad):
    with pytest.raises(GeometryError, match="finite stretch and angle"):
        UnimodularMetric(bad, 0.0)
    with pytest.raises(GeometryError, match="finite stretch and angle"):
        UnimodularMetric(1.0, bad)


@pytest.mark.parametrize(
    ("matrix", "message"),
    [
        ([[1.0, 0.1], [0.2, 1.0]], "symmetric 2x2"),
        ([[1.0, math.nan], [math.nan, 1.0]], "symmetric 2x2"),
        ([1.0, 2.0], "symmetric 2x2"),
        (np.eye(3), "symmetric 2x2"),
        ([[1.0, 2.0], [2.0, 1.0]], "positive definite"),
        ([[-1.0, 0.0], [0.0, -1.0]], "positive definite"),
        ([[0.0, 0.0], [0.0, 0.0]], "positive definite"),
    ],
)
def test_matrices_refused(matrix, message):
    with pytest.raises(GeometryError, match=message):
        UnimodularMetric.from_matrix(matrix)


@pytest.mark.parametrize("aspect_ratio", [0.0, -2.0, math.nan])
def test_aspect_ratios_refused(aspect_ratio):
    with pytest.raises(GeometryError, match="positive"):
        UnimodularMetric.from_aspect_ratio(aspect_ratio)


@pytest.mark.parametrize(("stretch", "other"), [(0.5 * math.log(2.0**63), 0.0), (300.0, 299.0), (354.0, 354.0)])
def test_distance_of_metrics_beyond_any_matrix(stretch, other):
    """Of one angle |Q1 - Q2|; at right angles Q1 + Q2."""
    first = UnimodularMetric(stretch, 0.3)
    assert first.distance(UnimodularMetric(other, 0.3)) == pytest.approx(stretch - other, rel=1e-12, abs=1e-12)
    assert first.distance(UnimodularMetric(other, 0.3 + 0.5 * math.pi)) == pytest.approx(stretch + other, rel=1e-12)


@pytest.mark.parametrize("step", [1e-12, 1e-9, 1e-3])
def test_distance_of_neighbours_does_not_cancel(step):
    """ds = sinh Q 2 d theta for a small turn."""
    found = UnimodularMetric(1.3, 0.2).distance(UnimodularMetric(1.3, 0.2 + step))
    assert found == pytest.approx(2.0 * math.sinh(1.3) * step, rel=1e-4)
