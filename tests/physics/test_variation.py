"""Rigid and two-metric problems: kinetic energy of the orbit against the interaction."""

from __future__ import annotations

import math
from functools import partial

import numpy as np
import pytest
from scipy.optimize import minimize_scalar
from scipy.special import agm

from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.mass import mass_metric_from_ratio
from mcgeo.problem.problem import Problem
from mcgeo.runs.liquid import Liquid
from mcgeo.variational.energy_surface import EnergySurface
from mcgeo.variational.minimum import find_minimum
from mcgeo.variational.response import mass_response
from mcgeo.variational.variation import (
    RIGID,
    TWO_METRIC,
    RigidSurface,
    TwoMetricSurface,
    Variation,
    kinetic_energy,
    orbit_estimates,
    surface_of,
)

# Level mixing, mass aspect a, and the optimum gamma* and energy for E_C = -0.4098: the one-metric variation
# E(gamma) = (gamma/a + a/gamma)/(4 kappa) + E_C/AGM(sqrt gamma, 1/sqrt gamma), minimised independently of this package.
ONE_METRIC = [
    (2.0, 0.5, 1.93658, 0.601635),
    (2.0, 5.0, 1.58959, -0.301716),
    (2.0, 20.0, 1.26323, -0.380720),
    (4.0, 1.0, 3.58503, 0.131427),
    (4.0, 10.0, 2.07502, -0.335394),
]
E_C = -0.4098


def coulomb_energy(liquid: Liquid) -> float:
    """The liquid's own isotropic energy."""
    return EnergySurface(liquid.occupations, Problem(ISOTROPIC, Coulomb())).energy(ISOTROPIC)


@pytest.mark.parametrize(("aspect", "mixing", "gamma", "energy"), ONE_METRIC)
def test_rigid_optimum_is_that_of_the_closed_form(
    third: Liquid, aspect: float, mixing: float, gamma: float, energy: float
) -> None:
    """With the liquid's own energy in the closed form; and near the tabulated numbers, whose E_C differs by 1e-4."""
    own = coulomb_energy(third)

    def closed(stretch: float) -> float:
        kinetic = math.cosh(stretch - math.log(aspect)) / (2.0 * mixing)
        return kinetic + own / agm(math.exp(0.5 * stretch), math.exp(-0.5 * stretch))

    expected = minimize_scalar(closed, bounds=(0.0, 2.5), method="bounded", options={"xatol": 1e-9})
    problem = Problem(mass_metric_from_ratio(aspect**2, 0.4), Coulomb())
    found = find_minimum(RigidSurface(third.occupations, problem, mixing))
    assert found.stretch.value == pytest.approx(expected.x, abs=1e-6)
    assert found.energy.value == pytest.approx(expected.fun, abs=1e-9)
    assert found.angle.value == pytest.approx(0.4, abs=1e-9)
    assert found.aspect_ratio.value == pytest.approx(gamma, rel=1e-3)
    assert found.energy.value - own == pytest.approx(energy - E_C, abs=2e-4)


def test_kinetic_law() -> None:
    """hbar omega_c/2 for the mass's own orbit; (gamma/a + a/gamma)/4 for co-axial metrics; three times in level 1."""
    mass = mass_metric_from_ratio(4.0, 0.2)
    for level, factor in ((0, 1.0), (1, 3.0)):
        problem = Problem(mass, Coulomb(), level)
        assert kinetic_energy(problem, mass, 1.0) == pytest.approx(0.5 * factor, rel=1e-14)
        gamma = UnimodularMetric(math.log(3.0), 0.2)
        assert kinetic_energy(problem, gamma, 2.0) == pytest.approx(factor * (3.0 / 2.0 + 2.0 / 3.0) / 8.0, rel=1e-13)


def test_two_metrics_do_better_than_either_restriction(third: Liquid) -> None:
    problem = Problem(mass_metric_from_ratio(9.0, -0.3), Coulomb())
    mixing = 3.0
    rigid, both = (
        find_minimum(surface_of(third.occupations, problem, Variation(kind, mixing))) for kind in (RIGID, TWO_METRIC)
    )
    projected = find_minimum(EnergySurface(third.occupations, problem))
    fixed_orbit = projected.energy.value + kinetic_energy(problem, problem.mass_metric, mixing)
    assert both.energy.value < min(rigid.energy.value, fixed_orbit) - 1e-4
    assert both.angle.value == pytest.approx(-0.3, abs=1e-6)


def test_joint_minimum_is_stationary_in_both_metrics(third: Liquid) -> None:
    problem = Problem(mass_metric_from_ratio(6.0, 0.5), Coulomb())
    surface = TwoMetricSurface(third.occupations, problem, 4.0)
    hole = find_minimum(surface).metric
    orbit = surface.orbit_of(hole)
    step = 1e-3
    at = surface.joint.energies(orbit, hole).mean()

    def moved(point: np.ndarray) -> float:
        return float(surface.joint.energies(orbit.displaced(*point[:2]), hole.displaced(*point[2:])).mean())

    for direction in step * np.eye(4):
        up, down = moved(direction), moved(-direction)
        assert abs(up - down) / (2.0 * step) < 1e-6
        assert up + down > 2.0 * at


def test_limits_of_level_mixing(third: Liquid) -> None:
    """Strong field: the orbit is the mass's and the hole that of the projected problem."""
    problem = Problem(mass_metric_from_ratio(4.0), Coulomb())
    surface = TwoMetricSurface(third.occupations, problem, 1e-3)
    strong = find_minimum(surface)
    projected = find_minimum(EnergySurface(third.occupations, problem))
    orbit, _ = orbit_estimates(surface, strong)
    assert orbit.value == pytest.approx(problem.mass_metric.stretch, abs=1e-3)
    assert strong.stretch.value == pytest.approx(projected.stretch.value, abs=1e-3)


def test_errors_of_orbit_and_hole_come_from_the_samples(third: Liquid) -> None:
    """Halves of the run differ by what the errors of the whole say, within a factor of three."""
    import dataclasses

    problem = Problem(mass_metric_from_ratio(4.0), Coulomb())
    whole = TwoMetricSurface(third.occupations, problem, 5.0)
    minimum = find_minimum(whole)
    orbit, _ = orbit_estimates(whole, minimum)
    n = len(third.occupations.samples) // 2
    holes, orbits = [], []
    for part in (slice(0, n), slice(n, 2 * n)):
        half = dataclasses.replace(third.occupations, samples=third.occupations.samples[part])
        surface = TwoMetricSurface(half, problem, 5.0)
        found = find_minimum(surface)
        holes.append(found.stretch.value)
        orbits.append(surface.orbit_of(found.metric).stretch)
    # The difference of halves has twice the error of the whole.
    for pair, error in ((holes, minimum.stretch.error), (orbits, orbit.error)):
        assert abs(pair[0] - pair[1]) < 4.0 * 2.0 * error


def test_response_of_the_rigid_problem(third: Liquid) -> None:
    """ln gamma* = ln a/(1 + kappa |E_C|/4) at weak anisotropy."""
    mixing = 3.0
    problem = Problem(ISOTROPIC, Coulomb())
    maker = partial(surface_of, third.occupations, variation=Variation(RIGID, mixing))
    response = mass_response(lambda other: maker(other), problem).response
    assert response.value == pytest.approx(1.0 / (1.0 + mixing * abs(coulomb_energy(third)) / 4.0), rel=1e-6)
    assert np.isfinite(response.error)
