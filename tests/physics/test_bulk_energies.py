"""Larger systems of the other liquids: energies of the infinite liquid, and S(q) at long wavelengths."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest

from mcgeo.estimate.statistics import mean_estimate
from mcgeo.geometry.metric import ISOTROPIC
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.problem import Problem
from mcgeo.runs.liquid import Liquid
from mcgeo.variational.energy_surface import EnergySurface
from tests.physics.checks import require_agreement
from tests.physics.test_every_liquid import sampled_liquid

# Coulomb energy per particle and its uncertainty. Fermions at 1/2: about -0.457 (Park, Melik-Alaverdian, Bonesteel and
# Jain, Phys. Rev. B 58, R10167 (1998), from memory), -0.4574(2) by sampling on the sphere, computed independently of
# this package, as are bosons at 1 (-0.450(2)), 1/2 (-0.48459(3)) and 1/4 (-0.36170(2)).
LIQUIDS: dict[str, tuple[dict[str, Any], int, float, float, int]] = {
    "Moore-Read 1/2": ({"kind": "moore_read", "filling": "1/2", "electrons": 40}, 600, -0.4574, 2e-4, 3),
    "Moore-Read bosons 1": ({"kind": "moore_read", "filling": "1", "electrons": 40}, 600, -0.450, 2e-3, 2),
    "bosons 1/2": ({"kind": "laughlin", "exponent": 2, "electrons": 50}, 4000, -0.48459, 3e-5, 2),
    "bosons 1/4": ({"kind": "laughlin", "exponent": 4, "electrons": 50}, 4000, -0.36170, 2e-5, 4),
}


@pytest.fixture(scope="module")
def liquids(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Liquid]:
    def folder() -> Path:
        return tmp_path_factory.mktemp("bulk")

    return {name: sampled_liquid(folder(), state, sweeps, seed=41) for name, (state, sweeps, *_) in LIQUIDS.items()}


@pytest.mark.parametrize("name", LIQUIDS)
def test_energy_of_the_infinite_liquid(liquids: dict[str, Liquid], name: str) -> None:
    _, _, energy, uncertainty, _ = LIQUIDS[name]
    samples = EnergySurface(liquids[name].occupations, Problem(ISOTROPIC, Coulomb())).sample_energies(ISOTROPIC)
    found = mean_estimate(samples)
    require_agreement(found.value, found.error, energy, 2.0 * uncertainty)


def excess(liquid: Liquid, shift: int, longest: float) -> float:
    """Mean over waves |q| < ``longest`` of (S - q^2/2 - (s - 2) q^4/8)/q^4, in standard errors."""
    inside = liquid.norm < longest
    q = liquid.norm[inside]
    samples = (liquid._sampled_structure[:, inside] - q**2 / 2.0 - (shift - 2.0) * q**4 / 8.0) / q**4
    # S fluctuates in proportion to itself: long waves know little of the q^4 term.
    weights = q**4 / np.sum(q**4)
    found = mean_estimate(samples @ weights)
    return found.value / found.error


@pytest.mark.parametrize(("name", "tolerance"), [("Moore-Read 1/2", 4.0), ("bosons 1/2", 4.0), ("bosons 1/4", 4.0)])
def test_quartic_law_of_the_shift(liquids: dict[str, Liquid], name: str, tolerance: float) -> None:
    """S = q^2/2 + (s - 2) q^4/8 + O(q^6): Kalinay et al., J. Stat. Phys. 98, 639 (2000) for Laughlin; Can, Laskin and
    Wiegmann, Phys. Rev. Lett. 113, 046803 (2014), for states of shift s."""
    shift = LIQUIDS[name][-1]
    assert abs(excess(liquids[name], shift, 0.55)) < tolerance
    assert abs(excess(liquids[name], shift + 2, 0.55)) > tolerance
