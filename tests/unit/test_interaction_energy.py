"""Derivatives of the energy by the hole's metric, and the quadrature behind them."""

from __future__ import annotations

import math
from fractions import Fraction

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.estimate.occupations import PairOccupations
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import INTERACTIONS, Coulomb, Interaction
from mcgeo.problem.landau_level import form_factor_derivatives, form_factor_sq
from mcgeo.problem.problem import Problem
from mcgeo.problem.tilted_field import TiltedField
from mcgeo.states.base import FERMIONS
from mcgeo.variational import quadrature
from mcgeo.variational.derivatives import expansion
from mcgeo.variational.interaction_energy import basis_derivatives, interaction_energy
from mcgeo.variational.ray_table import rough_energies
from mcgeo.variational.variation import JointEnergy

OCCUPATIONS = PairOccupations(
    "test",
    Fraction(1, 3),
    FERMIONS,
    np.arange(1, 24, 2),
    np.random.default_rng(5).normal(0.0, 0.3, (7, 12)) * 0.7 ** np.arange(12),
)
INTERACTIONS_OF_EVERY_KIND: list[Interaction] = [
    Coulomb(UnimodularMetric(0.8, 1.0)),
    INTERACTIONS["gaussian"](0.9),
    INTERACTIONS["yukawa"](0.7),
    INTERACTIONS["one_gate"](2.0),
    INTERACTIONS["two_gates"](30.0),
    INTERACTIONS["square_well"](2.0),
    INTERACTIONS["fang_howard"](1.5),
    INTERACTIONS["gaussian_well"](1.2),
    INTERACTIONS["softened"](0.5),
    INTERACTIONS["power_law"](1.4),
    INTERACTIONS["dipole"](0.6, 0.9, 0.4),
    INTERACTIONS["pseudopotentials"]({1: 1.0, 3: -0.3}, UnimodularMetric(0.4, 0.2)),
    INTERACTIONS["sum"](((0.7, Coulomb()), (0.4, INTERACTIONS["dipole"](0.6, 0.9, 0.4)))),
]


@pytest.mark.parametrize("s", [0.02, 1.7, 30.0, 110.0])
def test_basis_against_mpmath(s: float) -> None:
    found = basis_derivatives(OCCUPATIONS, np.array([math.sqrt(s)]))[:, :, 0]
    for row, m in enumerate(OCCUPATIONS.m):

        def function(x: mpmath.mpf, m: int = int(m)) -> mpmath.mpf:
            return mpmath.mpf(4) / 3 * mpmath.laguerre(m, 0, x) * mpmath.exp(-x / 2)

        with mpmath.workdps(40):
            exact = [float(s**order * mpmath.diff(function, s, order)) for order in range(3)]
        np.testing.assert_allclose(found[:, row], exact, rtol=1e-10, atol=1e-11)


@pytest.mark.parametrize("level", [0, 2])
@pytest.mark.parametrize("interaction", INTERACTIONS_OF_EVERY_KIND, ids=lambda v: v.name[:25])
def test_derivatives_against_differences(interaction: Interaction, level: int) -> None:
    problem = Problem(UnimodularMetric(0.6, -0.3), interaction, level)
    hole, energies = UnimodularMetric(0.5, 0.4), interaction_energy(OCCUPATIONS)
    found = energies.expansion(problem, hole)
    by_differences = expansion(lambda point: energies.energies(problem, hole.displaced(*point)), 2)
    np.testing.assert_allclose(found.energy, by_differences.energy, atol=1e-14)
    np.testing.assert_allclose(found.gradient, by_differences.gradient, atol=2e-6)
    np.testing.assert_allclose(found.hessian, by_differences.hessian, atol=2e-5)
    # A sign or a factor wrong would be seen.
    assert np.max(np.abs(found.gradient)) > 1e-3 and np.max(np.abs(found.hessian[:, 0, 1])) > 1e-4


def test_derivatives_in_a_tilted_field() -> None:
    problem = Problem(UnimodularMetric(0.6, -0.3), Coulomb(), 1, TiltedField(0.7, 2.0, 0.4))
    hole, energies = UnimodularMetric(0.5, 0.4), interaction_energy(OCCUPATIONS)
    found = energies.expansion(problem, hole)
    by_differences = expansion(lambda point: energies.energies(problem, hole.displaced(*point)), 2)
    np.testing.assert_allclose(found.gradient, by_differences.gradient, atol=1e-6)
    np.testing.assert_allclose(found.hessian, by_differences.hessian, atol=1e-5)


@pytest.mark.parametrize("interaction", INTERACTIONS_OF_EVERY_KIND, ids=lambda v: v.name[:25])
def test_mean_is_that_of_the_samples(interaction: Interaction) -> None:
    problem, hole = Problem(UnimodularMetric(0.6, -0.3), interaction), UnimodularMetric(0.5, 0.4)
    energies = interaction_energy(OCCUPATIONS)
    samples, mean = energies.expansion(problem, hole), energies.average.expansion(problem, hole)
    for name in ("energy", "gradient", "hessian"):
        np.testing.assert_allclose(getattr(mean, name)[0], getattr(samples, name).mean(axis=0), atol=1e-13)


@pytest.mark.parametrize("hole", [(0.7, 0.3), (-0.7, 0.3), (0.0, 0.0)])
@pytest.mark.parametrize(
    ("interaction", "tilt"),
    [
        (Coulomb(), None),
        (Coulomb(UnimodularMetric(-0.5, 0.3)), None),
        (INTERACTIONS["yukawa"](1.0), None),
        (Coulomb(), TiltedField(0.7, 2.0, 0.3)),
        (Coulomb(), TiltedField(0.7, 2.0, 0.3 + math.pi / 2)),
    ],
)
def test_quarter_turn_where_axes_coincide(
    monkeypatch: pytest.MonkeyPatch, interaction: Interaction, tilt: TiltedField | None, hole: tuple[float, float]
) -> None:
    problem, metric = Problem(UnimodularMetric(0.9, 0.3), interaction, 1, tilt), UnimodularMetric(*hole)
    radii, sizes = np.array([1e-3, 0.4, 1.5, 3.0]), []
    potential = Problem.effective_potential

    def counted(self: Problem, wavevectors: NDArray[np.float64]) -> NDArray[np.float64]:
        sizes.append(wavevectors.size)
        return potential(self, wavevectors)

    monkeypatch.setattr(Problem, "effective_potential", counted)
    quarter = quadrature.angular_harmonics(problem, metric, radii)
    monkeypatch.setattr(quadrature, "_mirror_axis", lambda problem, metric: None)
    half = quadrature.angular_harmonics(problem, metric, radii)
    assert sizes[1] == 2 * sizes[0]
    np.testing.assert_allclose(quarter, half, atol=1e-12 * np.max(np.abs(half)))


@pytest.mark.parametrize(
    "problem",
    [
        Problem(UnimodularMetric(0.9, 0.3), Coulomb(UnimodularMetric(0.5))),
        Problem(UnimodularMetric(0.9), INTERACTIONS["dipole"](0.6, 0.9, 0.4)),
        Problem(UnimodularMetric(0.9), Coulomb(), 0, TiltedField(0.7, 2.0, 0.4)),
        Problem(ISOTROPIC, Coulomb(), 0, TiltedField(0.7, 2.0, 0.4)),
    ],
)
def test_no_quarter_turn_where_they_do_not(problem: Problem) -> None:
    harmonics = quadrature.angular_harmonics(problem, UnimodularMetric(0.2), np.array([0.5, 1.5]))
    assert np.min(np.abs(harmonics[:, 2])) > 1e-4


@pytest.mark.parametrize("interaction", INTERACTIONS_OF_EVERY_KIND, ids=lambda v: v.name[:25])
def test_rough_energies_are_those_of_the_surface_nearly(interaction: Interaction) -> None:
    problem = Problem(UnimodularMetric(0.7, 0.2), interaction, 1)
    points = np.random.default_rng(3).uniform(-1.2, 1.2, (12, 2))
    energies = interaction_energy(OCCUPATIONS).average
    exact = [energies.energies(problem, problem.orbit.metric.displaced(*point))[0] for point in points]
    rough = rough_energies(OCCUPATIONS, problem, points)
    np.testing.assert_allclose(rough, exact, atol=1e-3 * np.ptp(exact))


def test_no_metric_is_no_matter_for_the_isotropic_problem() -> None:
    """At the isotropic point of an isotropic problem the gradient is zero and the Hessian a multiple of one."""
    found = interaction_energy(OCCUPATIONS).expansion(Problem(ISOTROPIC, Coulomb()), ISOTROPIC)
    np.testing.assert_allclose(found.gradient, 0.0, atol=1e-14)
    np.testing.assert_allclose(found.hessian, found.hessian[:, :1, :1] * np.eye(2), atol=1e-14)


@pytest.mark.parametrize("level", [0, 1, 2])
def test_derivatives_of_the_form_factor_against_differences(level: int) -> None:
    q, orbit = np.array([[0.7, -0.4], [2.0, 1.1], [1e-3, 4.0]]), UnimodularMetric(0.8, 0.5)
    found = form_factor_derivatives(q, level, orbit)
    by_differences = expansion(lambda point: form_factor_sq(q, level, orbit.displaced(*point)), 2)
    np.testing.assert_allclose(found[0], by_differences.energy, rtol=1e-14)
    np.testing.assert_allclose(found[1:3].T, by_differences.gradient, atol=1e-5)
    np.testing.assert_allclose(found[3:].T, by_differences.hessian[:, [0, 0, 1], [0, 1, 1]], atol=1e-5)
    assert np.min(np.max(np.abs(found), axis=1)) > 0.01


@pytest.mark.parametrize("level", [0, 2])
@pytest.mark.parametrize("interaction", INTERACTIONS_OF_EVERY_KIND, ids=lambda v: v.name[:25])
def test_joint_derivatives_against_differences(interaction: Interaction, level: int) -> None:
    orbit, hole = UnimodularMetric(0.6, -0.3), UnimodularMetric(0.5, 0.4)
    joint = JointEnergy(interaction_energy(OCCUPATIONS), Problem(UnimodularMetric(0.9), interaction, level), 2.0)
    found = joint.expansion(orbit, hole)
    by_differences = expansion(lambda point: joint.energies(orbit.displaced(*point[:2]), hole.displaced(*point[2:])), 4)
    np.testing.assert_allclose(found.energy, by_differences.energy, atol=1e-13)
    np.testing.assert_allclose(found.gradient, by_differences.gradient, atol=3e-6)
    np.testing.assert_allclose(found.hessian, by_differences.hessian, atol=3e-5)


def test_pseudopotentials_do_not_know_the_orbit() -> None:
    interaction = INTERACTIONS["pseudopotentials"]({1: 1.0, 3: -0.3})
    found = Problem(UnimodularMetric(0.6), interaction).orbit_derivatives(np.array([[0.3, 0.2], [1.0, -2.0]]))
    assert np.all(found[1:] == 0.0) and np.all(found[0] != 0.0)


def test_orbit_of_a_tilted_field_does_not_vary() -> None:
    with pytest.raises(GeometryError, match="across the plane only"):
        Problem(ISOTROPIC, Coulomb(), 0, TiltedField(0.7, 2.0)).orbit_derivatives(np.array([[0.3, 0.2]]))
