"""The optimal metric: its response to the mass, its errors, and what is said of its stability."""

from __future__ import annotations

import dataclasses
import math
from functools import partial

import numpy as np
import pytest
from scipy.stats import chi2

from mcgeo.errors import GeometryError
from mcgeo.estimate.statistics import Estimate
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import Coulomb, Gaussian
from mcgeo.problem.mass import mass_metric_from_ratio
from mcgeo.problem.problem import Problem
from mcgeo.runs.liquid import Liquid
from mcgeo.variational.energy_surface import EnergySurface
from mcgeo.variational.minimum import SEARCH_RADIUS, find_minimum
from mcgeo.variational.response import SOFT, STABLE, UNSTABLE, mass_response, shape_verdict
from tests.physics.checks import LEAST_PROBABILITY, Sampler, require_agreement


@pytest.mark.parametrize("level", [0, 1])
@pytest.mark.parametrize("name", ["third", "fifth"])
def test_response_is_the_slope_at_small_mass(request: pytest.FixtureRequest, name: str, level: int) -> None:
    occupations = request.getfixturevalue(name).occupations
    problem = Problem(ISOTROPIC, Coulomb(), level)
    response = mass_response(partial(EnergySurface, occupations), problem)
    slopes = []
    for mass_stretch in (0.005, 0.01):
        minimum = find_minimum(EnergySurface(occupations, problem.with_mass(UnimodularMetric(mass_stretch))))
        slopes.append(minimum.stretch.value / mass_stretch)
    # Q* is odd in Q_m: two slopes give the one at zero to fourth order.
    assert response.response.value == pytest.approx((4.0 * slopes[0] - slopes[1]) / 3.0, rel=1e-5)
    expansion = find_minimum(EnergySurface(occupations, problem))
    assert expansion.metric == ISOTROPIC
    assert response.isotropic_stiffness.value == pytest.approx(expansion.least_stiffness, rel=1e-6)


def test_hole_follows_the_mass_less_than_in_proportion_in_the_lowest_level(third: Liquid) -> None:
    for ratio in (1.5, 4.0):
        mass = mass_metric_from_ratio(ratio)
        minimum = find_minimum(EnergySurface(third.occupations, Problem(mass, Coulomb())))
        assert 0.0 < minimum.stretch.value < mass.stretch
        assert minimum.gain_isotropic.value > 4.0 * minimum.gain_isotropic.error
        assert minimum.gain_mass.value > 4.0 * minimum.gain_mass.error


def test_gains_are_those_of_the_surface(third: Liquid) -> None:
    mass = mass_metric_from_ratio(4.0, 0.5)
    surface = EnergySurface(third.occupations, Problem(mass, Coulomb()))
    minimum = find_minimum(surface)
    lowest = surface.energy(minimum.metric)
    assert minimum.energy.value == pytest.approx(lowest, abs=1e-12)
    assert minimum.gain_isotropic.value == pytest.approx(surface.energy(ISOTROPIC) - lowest, abs=1e-12)
    assert minimum.gain_mass.value == pytest.approx(surface.energy(mass) - lowest, abs=1e-12)
    # In the liquid's energy nearly all of the noise is common to all metrics.
    assert minimum.gain_isotropic.error < 0.2 * minimum.energy.error


def test_stiffness_is_the_curvature_along_both_directions(third: Liquid) -> None:
    surface = EnergySurface(third.occupations, Problem(mass_metric_from_ratio(3.0, 0.4), Coulomb()))
    minimum = find_minimum(surface)
    step = 0.05
    for direction in ((1.0, 0.0), (0.0, 1.0), (math.sqrt(0.5), math.sqrt(0.5))):
        x, y = step * np.array(direction)
        sides = [surface.energy(minimum.metric.displaced(sign * x, sign * y)) for sign in (1.0, -1.0)]
        curvature = (sum(sides) - 2.0 * minimum.energy.value) / step**2
        expected = np.array(direction) @ minimum.stiffness @ np.array(direction)
        assert curvature == pytest.approx(expected, rel=2e-3)


def require_consistent(estimates: list[Estimate]) -> None:
    """Independent estimates of one number scatter as their errors say."""
    value = np.array([estimate.value for estimate in estimates])
    weight = 1.0 / np.array([estimate.error for estimate in estimates]) ** 2
    total = float(weight @ (value - weight @ value / weight.sum()) ** 2)
    freedom = len(value) - 1
    probability = min(chi2.sf(total, freedom), chi2.cdf(total, freedom))
    assert probability > LEAST_PROBABILITY, f"chi-square {total} of {freedom}"


def test_errors_of_the_optimum_are_those_of_independent_runs(sampled: Sampler) -> None:
    # Mass and dielectric at an angle: neither Q nor theta is fixed by symmetry.
    problem = Problem(mass_metric_from_ratio(4.0), Coulomb(UnimodularMetric(0.5, 0.5)))
    liquids = [sampled(3, 16, sweeps=1000, seed=300 + run) for run in range(10)]
    found = [find_minimum(EnergySurface(liquid.occupations, problem)) for liquid in liquids]
    quantities = {
        "stretch": [minimum.stretch for minimum in found],
        "angle": [minimum.angle for minimum in found],
        "energy": [minimum.energy for minimum in found],
        "gain": [minimum.gain_isotropic for minimum in found],
        "stiffness": [Estimate(m.stiffness[0, 0], m.stiffness_error[0, 0]) for m in found],
        "response": [mass_response(partial(EnergySurface, liquid.occupations), problem).response for liquid in liquids],
    }
    for estimates in quantities.values():
        require_consistent(estimates)
        # Errors three times too small would be seen.
        with pytest.raises(AssertionError):
            require_consistent([Estimate(e.value, e.error / 3.0) for e in estimates])


def test_size_of_the_liquid_does_not_matter(third: Liquid, sampled: Sampler) -> None:
    problem = Problem(mass_metric_from_ratio(4.0), Coulomb())
    large, small = (
        find_minimum(EnergySurface(liquid.occupations, problem))
        for liquid in (third, sampled(3, 16, sweeps=4000, seed=320))
    )
    for one, other in ((large.stretch, small.stretch), (large.energy, small.energy)):
        require_agreement(one.value, math.hypot(one.error, other.error), other.value, 2e-4)


def test_next_level_is_soft_at_one_third(third: Liquid) -> None:
    lowest, next_one = (Problem(ISOTROPIC, Coulomb(), level) for level in (0, 1))
    stiff, soft = (mass_response(partial(EnergySurface, third.occupations), problem) for problem in (lowest, next_one))
    # Ten times softer, and stable still.
    difference = stiff.isotropic_stiffness.value - soft.isotropic_stiffness.value
    assert difference > 10.0 * math.hypot(stiff.isotropic_stiffness.error, soft.isotropic_stiffness.error)
    assert soft.isotropic_stiffness.value > 4.0 * soft.isotropic_stiffness.error
    assert soft.response.value - 1.0 > 4.0 * soft.response.error
    for problem, response, verdict in ((lowest, stiff, STABLE), (next_one, soft, SOFT)):
        minimum = find_minimum(EnergySurface(third.occupations, problem))
        assert minimum.metric == ISOTROPIC and math.isinf(minimum.angle.error)
        assert shape_verdict(problem, minimum, response) == verdict


def test_liquid_that_prefers_an_ellipse_is_unstable(bosons: Liquid) -> None:
    # Bosons at 1/2 with the interaction of the next level: the circle is a maximum.
    problem = Problem(ISOTROPIC, Coulomb(), 1)
    minimum = find_minimum(EnergySurface(bosons.occupations, problem))
    response = mass_response(partial(EnergySurface, bosons.occupations), problem)
    assert minimum.interior and minimum.metric.stretch > 0.1
    assert minimum.gain_isotropic.value > 4.0 * minimum.gain_isotropic.error
    assert response.isotropic_stiffness.value < -4.0 * response.isotropic_stiffness.error
    assert shape_verdict(problem, minimum, response) == UNSTABLE


@pytest.mark.parametrize("ratio", [1.0, 3.0])
@pytest.mark.parametrize("interaction", [Coulomb(), Gaussian(1.0)])
def test_liquid_without_a_minimum_is_unstable(
    third: Liquid, interaction: Coulomb | Gaussian, ratio: float
) -> None:
    # Correlations of the opposite sign: every minimum of the energy becomes a maximum.
    reversed_liquid = dataclasses.replace(third.occupations, samples=-third.occupations.samples)
    problem = Problem(mass_metric_from_ratio(ratio), interaction)
    minimum = find_minimum(EnergySurface(reversed_liquid, problem))
    assert not minimum.interior
    assert minimum.metric.distance(problem.mass_metric) == pytest.approx(SEARCH_RADIUS, abs=1e-6)
    assert math.isinf(minimum.stretch.error)
    response = mass_response(partial(EnergySurface, reversed_liquid), problem)
    assert response.isotropic_stiffness.value < 0.0
    assert shape_verdict(problem, minimum, response) == UNSTABLE


def test_metric_out_of_range_is_refused(third: Liquid) -> None:
    surface = EnergySurface(third.occupations, Problem(mass_metric_from_ratio(4.0), Coulomb()))
    with pytest.raises(GeometryError, match="at most 4 works"):
        surface.energy(UnimodularMetric(5.0))
