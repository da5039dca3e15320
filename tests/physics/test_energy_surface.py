"""Energies over the metric of the hole against quadrature in the lab, closed forms and changes of frame."""

from __future__ import annotations

import math
from functools import partial

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.special import eval_laguerre

from mcgeo.estimate.statistics import mean_estimate
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import Coulomb, Gaussian, Interaction
from mcgeo.problem.mass import mass_metric_from_ratio
from mcgeo.problem.problem import Problem
from mcgeo.runs.liquid import Liquid
from mcgeo.variational.energy_surface import EnergySurface
from mcgeo.variational.minimum import find_minimum
from mcgeo.variational.response import mass_response
from tests.exact.torus_diagonalisation import metric_norm_sq
from tests.exact.torus_shapes import stretched
from tests.physics.checks import require_agreement
from tests.physics.closed_forms import agm_factor


def quadrature_energy(
    liquid: Liquid,
    interaction: Interaction,
    level: int,
    orbit: NDArray[np.float64],
    hole: NDArray[np.float64],
) -> float:
    """1/2 int d^2q/(2 pi)^2 V F^2 (Sbar(|q|_g) - 1) at 1/3 over lab wavevectors, metrics as matrices."""
    nodes, weights = np.polynomial.legendre.leggauss(600)
    q, phi = 12.0 * (nodes + 1.0), math.pi * np.arange(240) / 240
    qx, qy = np.outer(q, np.cos(phi)), np.outer(q, np.sin(phi))
    in_orbit, in_hole = metric_norm_sq(orbit, qx, qy), metric_norm_sq(hole, qx, qy)
    correlations = np.full_like(qx, -1.0 / 3.0)
    for m, c in zip(liquid.occupations.m, liquid.occupations.coefficients, strict=True):
        correlations += 4.0 / 3.0 * c * eval_laguerre(m, in_hole) * np.exp(-0.5 * in_hole)
    orbit_factor = eval_laguerre(level, 0.5 * in_orbit) ** 2 * np.exp(-0.5 * in_orbit)
    integrand = interaction.potential(np.stack([qx, qy], axis=-1)) * orbit_factor * correlations
    return float(12.0 * weights @ (q[:, None] * integrand).mean(axis=1) / (4.0 * math.pi))


@pytest.mark.parametrize("level", [0, 1])
@pytest.mark.parametrize("interaction", [Coulomb(), Gaussian(0.7)])
@pytest.mark.parametrize(
    ("orbit", "hole"), [((0.0, 0.0), (0.0, 0.0)), ((0.4, 0.3), (0.9, -0.2)), ((1.2, 1.4), (0.3, 0.5))]
)
def test_energy_against_quadrature_in_the_lab(
    third: Liquid, orbit: tuple[float, float], hole: tuple[float, float], interaction: Interaction, level: int
) -> None:
    surface = EnergySurface(third.occupations, Problem(UnimodularMetric(*orbit), interaction, level))
    matrices = [stretched(math.exp(stretch), angle) for stretch, angle in (orbit, hole)]
    expected = quadrature_energy(third, interaction, level, *matrices)
    assert surface.energy(UnimodularMetric(*hole)) == pytest.approx(expected, abs=2e-9)
    if orbit != hole:
        exchanged = quadrature_energy(third, interaction, level, *matrices[::-1])
        assert abs(exchanged - expected) > 1e-4


@pytest.mark.parametrize("stretch", [0.2, math.log(2.0), math.log(4.0), 2.0])
@pytest.mark.parametrize("name", ["third", "fifth", "bosons"])
def test_state_stretched_as_a_whole(request: pytest.FixtureRequest, name: str, stretch: float) -> None:
    # The mean of 1/|r| over the ellipse of the metric is 1/AGM(e^(Q/2), e^(-Q/2)) over its radius.
    occupations = request.getfixturevalue(name).occupations
    isotropic = EnergySurface(occupations, Problem(ISOTROPIC, Coulomb())).energy(ISOTROPIC)
    metric = UnimodularMetric(stretch, 0.7)
    rigid = EnergySurface(occupations, Problem(metric, Coulomb())).energy(metric)
    assert rigid == pytest.approx(isotropic * agm_factor(stretch), rel=1e-8)


@pytest.mark.parametrize("level", [0, 1])
def test_interaction_of_the_same_metric_undoes_the_stretch(third: Liquid, level: int) -> None:
    isotropic = EnergySurface(third.occupations, Problem(ISOTROPIC, Coulomb(), level)).energy(ISOTROPIC)
    metric = UnimodularMetric(1.1, -0.4)
    problem = Problem(metric, Coulomb(metric), level)
    followed = EnergySurface(third.occupations, problem).energy(metric)
    assert followed == pytest.approx(isotropic, abs=1e-10)
    left_alone = EnergySurface(third.occupations, Problem(metric, Coulomb(), level)).energy(metric)
    assert left_alone - isotropic > 1e-3


@pytest.mark.parametrize("ratio", [1.3, 16.0, 0.25])
@pytest.mark.parametrize("interaction_range", [0.5, 1.0, 2.0])
def test_gaussian_interaction_has_its_exact_hole(
    third: Liquid, ratio: float, interaction_range: float
) -> None:
    # exp(-s^2 q^2/2) times the orbit's exp(-q.g_m^-1.q/2) is one Gaussian, of metric g*: all correlations
    # take it over.
    problem = Problem(mass_metric_from_ratio(ratio, 0.3), Gaussian(interaction_range))
    mass_stretch = 0.5 * abs(math.log(ratio))
    s_sq = interaction_range**2
    exact = 0.5 * math.log((s_sq + math.exp(mass_stretch)) / (s_sq + math.exp(-mass_stretch)))
    minimum = find_minimum(EnergySurface(third.occupations, problem))
    assert minimum.interior
    assert minimum.stretch.value == pytest.approx(exact, abs=1e-9)
    assert minimum.stretch.error < 1e-10
    angle = 0.3 if ratio > 1.0 else 0.3 - math.pi / 2.0
    assert minimum.angle.value == pytest.approx(angle, abs=1e-9)
    if interaction_range == 1.0:
        # The law of the square root: e^(2 Q*) is the root of the mass ratio.
        assert minimum.metric.aspect_ratio**2 == pytest.approx(math.exp(mass_stretch), rel=1e-8)


@pytest.mark.parametrize("interaction_range", [0.5, 1.0, 2.0])
@pytest.mark.parametrize("name", ["third", "bosons"])
def test_gaussian_interaction_has_its_exact_stiffness(
    request: pytest.FixtureRequest, name: str, interaction_range: float
) -> None:
    # Laguerre polynomials have the generating function exp(-t x/(1-t))/(1-t); with b = (1+t)/(1-t) and
    # v = 2 pi exp(-sigma q^2/2), sigma = 1 + s^2,
    # sum_m t^m V_m = (sigma^2 + b^2 + 2 sigma b cosh Q)^(-1/2)/(1-t).
    occupations = request.getfixturevalue(name).occupations
    sigma = 1.0 + interaction_range**2

    def second_derivative(t: mpmath.mpf) -> mpmath.mpf:
        return -sigma * (1 - t) * (1 + t) / (sigma * (1 - t) + 1 + t) ** 3

    series = np.array(mpmath.taylor(second_derivative, 0, int(occupations.m[-1])), dtype=float)
    exact = 2.0 * float(occupations.filling) * occupations.coefficients @ series[occupations.m]
    surface_for = partial(EnergySurface, occupations)
    found = mass_response(surface_for, Problem(ISOTROPIC, Gaussian(interaction_range)))
    assert found.isotropic_stiffness.value == pytest.approx(exact, rel=1e-5)
    # d/dQ_m of the exact Q* at zero.
    assert found.response.value == pytest.approx(1.0 / sigma, abs=1e-4)


@pytest.mark.parametrize("level", [0, 1])
def test_mass_at_an_angle_turns_the_hole_with_it(third: Liquid, level: int) -> None:
    angles = (0.0, 0.6, 2.0)
    problems = [Problem(mass_metric_from_ratio(1.3, angle), Coulomb(), level) for angle in angles]
    found = [find_minimum(EnergySurface(third.occupations, problem)) for problem in problems]
    for minimum, angle in zip(found, angles, strict=True):
        assert minimum.energy.value == pytest.approx(found[0].energy.value, abs=1e-10)
        assert minimum.stretch.value == pytest.approx(found[0].stretch.value, abs=1e-7)
        assert math.remainder(minimum.angle.value - angle, math.pi) == pytest.approx(0.0, abs=1e-6)


def test_inverse_mass_ratio_is_a_right_angle(third: Liquid) -> None:
    masses = [(1.0 / 3.0, 0.0), (3.0, math.pi / 2.0), (3.0, 0.0)]
    problems = [Problem(mass_metric_from_ratio(*mass), Coulomb()) for mass in masses]
    one, other, along_x = (find_minimum(EnergySurface(third.occupations, problem)) for problem in problems)
    assert one.energy.value == pytest.approx(other.energy.value, abs=1e-12)
    assert one.metric.distance(other.metric) < 1e-8
    assert along_x.metric.distance(one.metric) > 0.1


@pytest.mark.parametrize("stretch", [0.3, 0.9])
def test_dielectric_instead_of_mass_is_a_change_of_frame(third: Liquid, stretch: float) -> None:
    # Coordinates in which the dielectric is isotropic make it a mass of the inverse metric.
    metric = UnimodularMetric(stretch, 0.2)
    problems = [Problem(ISOTROPIC, Coulomb(metric)), Problem(metric, Coulomb())]
    dielectric, mass = (find_minimum(EnergySurface(third.occupations, problem)) for problem in problems)
    assert dielectric.energy.value == pytest.approx(mass.energy.value, abs=1e-10)
    assert dielectric.stretch.value == pytest.approx(stretch - mass.stretch.value, abs=1e-7)
    assert dielectric.angle.value == pytest.approx(0.2, abs=1e-6)


@pytest.mark.parametrize("level", [0, 1])
def test_isotropic_energy_of_the_levels(third: Liquid, level: int) -> None:
    # Haldane's pseudopotentials of the Coulomb interaction (Phys. Rev. Lett. 51, 605 (1983)) and their
    # counterpart in the next level, checked by quadrature independently of this package.
    m = third.occupations.m.astype(float)
    pseudopotential = np.array([math.gamma(k + 0.5) / (2.0 * math.factorial(int(k))) for k in m])
    background = -math.sqrt(math.pi / 8.0)
    if level == 1:
        pseudopotential *= (8 * m - 3) * (8 * m - 11) / (64 * (m - 0.5) * (m - 1.5))
        background *= 0.75
    exact = (background + 2.0 * third.occupations.samples @ pseudopotential) / 3.0
    surface = EnergySurface(third.occupations, Problem(ISOTROPIC, Coulomb(), level))
    assert surface.sample_energies(ISOTROPIC) == pytest.approx(exact, abs=1e-9)
    if level == 0:
        energy = mean_estimate(exact)
        require_agreement(energy.value, energy.error, -0.4098, 1e-4)
