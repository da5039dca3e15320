"""Susceptibilities of the hole: against minima of slightly changed problems, and by covariance."""

from __future__ import annotations

from functools import partial

import numpy as np
import pytest

from mcgeo.geometry.metric import ISOTROPIC
from mcgeo.problem.interaction import Coulomb, Gaussian
from mcgeo.problem.mass import mass_metric_from_ratio
from mcgeo.problem.pair_potential import Interaction
from mcgeo.problem.problem import Problem
from mcgeo.runs.liquid import Liquid
from mcgeo.variational.energy_surface import EnergySurface
from mcgeo.variational.minimum import find_minimum
from mcgeo.variational.response import mass_response
from mcgeo.variational.susceptibility import susceptibility, with_deformed_interaction, with_deformed_mass


@pytest.mark.parametrize("cause", [with_deformed_mass, with_deformed_interaction])
@pytest.mark.parametrize(("ratio", "angle"), [(1.0, 0.0), (5.0, 0.4)])
def test_against_the_moved_minimum(third: Liquid, cause: object, ratio: float, angle: float) -> None:
    """Central differences of the optimum itself, found anew for each changed problem."""
    assert callable(cause)
    problem = Problem(mass_metric_from_ratio(ratio, angle), Coulomb())
    maker = partial(EnergySurface, third.occupations)
    hole = find_minimum(maker(problem)).metric
    found = susceptibility(maker, problem, hole, cause).matrix
    h = 0.05
    for column, direction in enumerate(np.eye(2)):
        ends = [find_minimum(maker(cause(problem, sign * h * direction))).metric for sign in (1.0, -1.0)]
        moved = [np.array(end.relative_to(hole).flat_coordinates) for end in ends]
        assert np.allclose((moved[0] - moved[1]) / (2.0 * h), found[:, column], atol=3e-4)


@pytest.mark.parametrize("interaction", [Coulomb(), Gaussian(1.0), Gaussian(2.5)])
def test_isotropic_sum_rule(third: Liquid, interaction: Interaction) -> None:
    """Deforming mass and interaction alike carries the hole along: the two susceptibilities add to one.

    For a Gaussian of range s they are 1/(1 + s^2) and s^2/(1 + s^2): e^(2 Q*) = (s^2 + e^Q_m)/(s^2 + e^-Q_m).
    """
    problem = Problem(ISOTROPIC, interaction)
    maker = partial(EnergySurface, third.occupations)
    mass, shape = (
        susceptibility(maker, problem, ISOTROPIC, cause) for cause in (with_deformed_mass, with_deformed_interaction)
    )
    assert np.allclose(mass.matrix + shape.matrix, np.eye(2), atol=1e-6)
    assert mass.matrix[0, 0] == pytest.approx(mass_response(maker, problem).response.value, rel=1e-6)
    if isinstance(interaction, Gaussian):
        assert mass.matrix[0, 0] == pytest.approx(1.0 / (1.0 + interaction.range**2), abs=1e-6)
        # A law that holds for every liquid has no statistical error.
        assert float(np.max(mass.error)) < 1e-6
    else:
        assert 0.0 < mass.error[0, 0] < 1e-2
