"""What holds for every liquid: the Gaussian law; and what tells them apart: exponents and softness."""

from __future__ import annotations

import math
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from mcgeo.estimate.statistics import Estimate
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.interaction import Coulomb, Gaussian
from mcgeo.problem.mass import mass_metric_from_ratio
from mcgeo.problem.problem import Problem
from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.sample import sample
from mcgeo.variational.energy_surface import EnergySurface
from mcgeo.variational.minimum import find_minimum
from mcgeo.variational.response import SOFT, STABLE, UNSTABLE, mass_response, shape_verdict

STATES: dict[str, tuple[dict[str, Any], int]] = {
    "bosons 1/2": ({"kind": "laughlin", "exponent": 2, "electrons": 20}, 2000),
    "bosons 1/4": ({"kind": "laughlin", "exponent": 4, "electrons": 20}, 2000),
    "two thirds": ({"kind": "laughlin", "exponent": 3, "electrons": 20, "conjugate": True}, 2000),
    "Moore-Read": ({"kind": "moore_read", "filling": "1/2", "electrons": 20, "sector": "all"}, 800),
    "bosonic Moore-Read": ({"kind": "moore_read", "filling": "1", "electrons": 20, "sector": 2}, 800),
    "sea 1/2": ({"kind": "fermi_sea", "filling": "1/2", "electrons": 13}, 400),
    "sea 1/4": ({"kind": "fermi_sea", "filling": "1/4", "electrons": 13}, 300),
}


def sampled_liquid(folder: Path, state: dict[str, Any], sweeps: int, seed: int = 31) -> Liquid:
    sampling = {"walkers": 16, "sweeps": sweeps, "blocks": 4, "equilibration": 100, "seed": seed, "threads": 1}
    result = sample(config_from_resolved({"state": state, "sampling": sampling}), folder, quiet=True)
    assert isinstance(result, Liquid)
    return result


@pytest.fixture(scope="module")
def liquids(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Liquid]:
    return {
        name: sampled_liquid(tmp_path_factory.mktemp("state"), state, sweeps)
        for name, (state, sweeps) in STATES.items()
    }


def gaussian_optimum(reach: float, mass_stretch: float) -> float:
    """The orbit's and the interaction's Gaussians make one, whose shape every liquid takes: with V(q) ~ exp(-q^2 s^2/2)
    the guiding centres see exp(-q.(s^2 + g_m^-1).q/2), so e^(2 Q*) = (s^2 + e^Q_m)/(s^2 + e^-Q_m)."""
    return 0.5 * math.log((reach**2 + math.exp(mass_stretch)) / (reach**2 + math.exp(-mass_stretch)))


@pytest.mark.parametrize("name", STATES)
def test_gaussian_law_for_every_state(liquids: dict[str, Liquid], name: str) -> None:
    """Exact for any range and ratio, whatever the liquid: no statistical error enters."""
    for reach, ratio in ((1.0, 4.0), (0.6, 9.0), (2.0, 2.0)):
        mass = mass_metric_from_ratio(ratio, 0.4)
        surface = EnergySurface(liquids[name].occupations, Problem(mass, Gaussian(reach)))
        expected = UnimodularMetric(gaussian_optimum(reach, mass.stretch), 0.4)
        # The law says where the energy is stationary; whether that is the lowest point is the liquid's affair.
        gradient = surface.expansion_about(expected).gradient
        scale = np.abs(surface.expansion_about(expected).hessian).max()
        assert np.abs(gradient).max() < 1e-6 * scale
        off = surface.expansion_about(expected.displaced(0.1, 0.0)).gradient
        assert np.abs(off.mean(axis=0)).max() > 1e-3 * scale


def test_even_occupations_of_bosons(liquids: dict[str, Liquid]) -> None:
    found = liquids["bosons 1/4"].occupations
    assert np.all(found.m % 2 == 0)
    assert np.allclose(found.coefficients[found.m < 4], -1.0, atol=1e-9)


def exponents(liquid: Liquid, ratios: tuple[float, ...]) -> list[Estimate]:
    """ln(aspect of the hole)/ln sqrt(mass ratio) with its error."""
    found = []
    for ratio in ratios:
        minimum = find_minimum(EnergySurface(liquid.occupations, Problem(mass_metric_from_ratio(ratio), Coulomb())))
        half = 0.5 * math.log(ratio)
        found.append(Estimate(minimum.stretch.value / half, minimum.stretch.error / half))
    return found


def test_sea_is_near_the_square_root_law(liquids: dict[str, Liquid]) -> None:
    """Common practice of the trade: the contour's axis ratio is close to the root of the zero-field ratio, 1/2 here."""
    for exponent in exponents(liquids["sea 1/2"], (1.2, 4.0, 16.0)):
        assert abs(exponent.value - 0.5) < 0.06 + 4.0 * exponent.error
        assert exponent.error < 0.02


@pytest.mark.long
def test_exponents_of_the_sea_of_37(tmp_path: Path) -> None:
    """Mass ratios 1.2 to 16: 0.469(1), 0.473, 0.483, 0.500, 0.515 in a run of six times this length."""
    sea = sampled_liquid(tmp_path, {"kind": "fermi_sea", "filling": "1/2", "electrons": 37}, 1500)
    found = exponents(sea, (1.2, 2.0, 4.0, 9.0, 16.0))
    assert all(abs(exponent.value - 0.5) < 0.035 + 4.0 * exponent.error for exponent in found)
    assert all(exponent.error < 0.005 for exponent in found)
    # In level 1 the isotropic hole is no minimum.
    isotropic = Problem(UnimodularMetric(), Coulomb(), 1)
    response = mass_response(partial(EnergySurface, sea.occupations), isotropic)
    minimum = find_minimum(EnergySurface(sea.occupations, isotropic))
    assert response.isotropic_stiffness.value < -4.0 * response.isotropic_stiffness.error
    assert shape_verdict(isotropic, minimum, response) == UNSTABLE
    assert minimum.stretch.value > 0.0


def test_level_one_is_soft_or_unstable(liquids: dict[str, Liquid], third: Liquid) -> None:
    """The second level screens the short range: a much smaller stiffness, or none at all."""
    verdicts, stiffness = {}, {}
    for name, liquid in {**liquids, "third": third}.items():
        for level in (0, 1):
            problem = Problem(mass_metric_from_ratio(1.2), Coulomb(), level)
            maker = partial(EnergySurface, liquid.occupations)
            response = mass_response(maker, problem)
            verdicts[name, level] = shape_verdict(problem, find_minimum(maker(problem)), response)
            stiffness[name, level] = response.isotropic_stiffness
    for name in ("third", "Moore-Read", "sea 1/2"):
        assert verdicts[name, 0] == STABLE
        assert stiffness[name, 1].value < 0.6 * stiffness[name, 0].value
    assert verdicts["third", 1] == SOFT
    assert verdicts["sea 1/2", 1] in (SOFT, UNSTABLE)
