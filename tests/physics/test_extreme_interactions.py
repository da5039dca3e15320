"""Interactions at the ends of their ranges: fields from 0.1 mT to a kilotesla, wells and gates far and near."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Any

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import brentq
from scipy.special import eval_laguerre

from mcgeo.estimate.occupations import PairOccupations
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import INTERACTIONS, Interaction
from mcgeo.problem.problem import Problem
from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.scan import optimum
from mcgeo.states.base import FERMIONS
from mcgeo.variational.energy_surface import EnergySurface
from mcgeo.variational.minimum import Minimum, find_minimum
from tests.exact.torus_diagonalisation import metric_norm_sq
from tests.exact.torus_shapes import stretched

# A liquid that needs no sampling: pairs of three angular momenta, with errors of 1 %.
SAMPLES = np.array([-1.0, 0.6, -0.1]) * (1.0 + 0.03 * np.random.default_rng(4).normal(size=(10, 3)))
PAIRS = PairOccupations("few pairs", Fraction(1, 3), FERMIONS, np.array([1, 3, 5]), SAMPLES)


def logarithmic_quadrature(
    interaction: Interaction, level: int, orbit: NDArray[np.float64], hole: NDArray[np.float64]
) -> float:
    """1/2 int d^2q/(2 pi)^2 V F^2 (Sbar - 1) of `PAIRS` over lab wavevectors, with ln q as the variable."""
    nodes, weights = np.polynomial.legendre.leggauss(500)
    start, stop = math.log(1e-11), math.log(60.0)
    q, phi = np.exp(start + 0.5 * (stop - start) * (nodes + 1.0)), math.pi * np.arange(500) / 500
    qx, qy = np.outer(q, np.cos(phi)), np.outer(q, np.sin(phi))
    in_orbit, in_hole = metric_norm_sq(orbit, qx, qy), metric_norm_sq(hole, qx, qy)
    series = sum(c * eval_laguerre(m, in_hole) for m, c in zip(PAIRS.m, PAIRS.coefficients, strict=True))
    correlations = 4.0 / 3.0 * series * np.exp(-0.5 * in_hole) - 1.0 / 3.0
    orbit_factor = eval_laguerre(level, 0.5 * in_orbit) ** 2 * np.exp(-0.5 * in_orbit)
    integrand = interaction.potential(np.stack([qx, qy], axis=-1)) * orbit_factor * correlations
    return float(0.5 * (stop - start) * weights @ (q[:, None] ** 2 * integrand).mean(axis=1) / (4.0 * math.pi))


@pytest.mark.parametrize(("orbit", "hole"), [((math.log(10.0), 0.4), (0.9, -0.2)), ((-0.2, 0.3), (3.4, 0.4))])
@pytest.mark.parametrize(
    ("kind", "parameters", "level"),
    [
        ("square_well", (0.008,), 0),
        ("square_well", (780.0,), 1),
        ("two_gates", (0.012,), 0),
        ("two_gates", (1200.0,), 1),
        ("one_gate", (1200.0,), 2),
        ("yukawa", (1e-4,), 0),
        ("yukawa", (300.0,), 0),
        ("fang_howard", (1e-3,), 1),
        ("gaussian_well", (100.0,), 0),
        ("gaussian", (200.0,), 2),
        ("dipole", (0.01, 1.2, 0.3), 0),
        ("power_law", (1.9,), 0),
    ],
)
def test_energy_at_the_ends_of_the_ranges(
    kind: str, parameters: tuple[float, ...], level: int, orbit: tuple[float, float], hole: tuple[float, float]
) -> None:
    interaction = INTERACTIONS[kind](*parameters)
    matrices = [stretched(math.exp(stretch), angle) for stretch, angle in (orbit, hole)]
    surface = EnergySurface(PAIRS, Problem(UnimodularMetric(*orbit), interaction, level))
    exact = logarithmic_quadrature(interaction, level, *matrices)
    assert surface.energy(UnimodularMetric(*hole)) == pytest.approx(exact, rel=1e-8, abs=1e-11)


def problem_in_field(field: float, **problem: Any) -> dict[str, Any]:
    """``problem`` of a configuration of AlAs in a field (T), filled in from the material."""
    config = config_from_resolved(
        {
            "state": {"kind": "laughlin", "exponent": 3, "electrons": 37},
            "material": {"name": "AlAs", "field_tesla": field},
            "problem": problem,
        }
    )
    return dict(config.model_dump(mode="json", by_alias=True)["problem"])


def test_lengths_and_mixing_scale_with_the_root_of_the_field() -> None:
    """l_B ~ B^(-1/2) and kappa ~ B^(-1/2), over six decades."""
    weak, strong = (problem_in_field(b, interaction={"kind": "square_well", "width_nm": 20.0}) for b in (1e-3, 1e3))
    assert strong["interaction"]["width"] / weak["interaction"]["width"] == pytest.approx(1e3, rel=1e-12)
    weak, strong = (problem_in_field(b, variation="rigid") for b in (1e-3, 1e3))
    assert weak["level_mixing"] / strong["level_mixing"] == pytest.approx(1e3, rel=1e-12)


@pytest.mark.parametrize("field", [1e-3, 1.0, 1e3])
def test_rigid_optimum_in_any_field(field: float) -> None:
    """The root of d/dQ [cosh(Q - Q_m)/(2 kappa) + E_C/AGM(e^(Q/2), e^(-Q/2))]: one number instead of a search."""
    keys = problem_in_field(field, variation="rigid")
    found = optimum(PAIRS, keys)
    isotropic = EnergySurface(PAIRS, Problem(ISOTROPIC, found.problem.interaction)).energy(ISOTROPIC)
    mass = found.problem.mass_metric.stretch

    def slope(q: float) -> float:
        change = mpmath.diff(lambda x: 1 / mpmath.agm(mpmath.exp(x / 2), mpmath.exp(-x / 2)), q)
        return math.sinh(q - mass) / (2.0 * keys["level_mixing"]) + isotropic * float(change)

    assert found.minimum.interior
    assert found.minimum.stretch.value == pytest.approx(brentq(slope, 0.0, mass, xtol=1e-12), abs=1e-7)


def test_gates_near_and_far() -> None:
    """Far gates leave 1/r. Near ones leave 2 pi d (1 - (qd)^2/3), of which fermions feel only the second part."""

    def hole(interaction: Interaction) -> Minimum:
        return find_minimum(EnergySurface(PAIRS, Problem(UnimodularMetric(0.8, 0.3), interaction)))

    coulomb, far = hole(INTERACTIONS["coulomb"]()), hole(INTERACTIONS["two_gates"](1e5))
    assert far.stretch.value == pytest.approx(coulomb.stretch.value, abs=1e-5)
    near, nearer = (hole(INTERACTIONS["two_gates"](distance)) for distance in (1e-2, 5e-3))
    assert near.interior and nearer.interior
    assert near.stretch.value == pytest.approx(nearer.stretch.value, abs=1e-3)
    np.testing.assert_allclose(near.stiffness, 8.0 * nearer.stiffness, rtol=1e-2, atol=1e-12)
    assert abs(near.stretch.value - coulomb.stretch.value) > 0.05
