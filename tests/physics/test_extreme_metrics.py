"""Energies at extreme metrics, pair by pair: closed forms of Gaussian and Coulomb interactions."""

from __future__ import annotations

import math
from fractions import Fraction

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray

from mcgeo.errors import ConfigError, GeometryError
from mcgeo.estimate.occupations import PairOccupations
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.interaction import Coulomb, Gaussian
from mcgeo.problem.mass import mass_metric_from_ratio
from mcgeo.problem.problem import Problem
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.scan import require_reach
from mcgeo.states.base import FERMIONS
from mcgeo.variational.energy_surface import EnergySurface
from mcgeo.variational.interaction_energy import interaction_energy
from mcgeo.variational.minimum import find_minimum
from tests.exact.torus_shapes import stretched

MOMENTA = np.arange(1, 22, 2)
# One sample for each relative angular momentum, c_m = 1/(2 nu) there: its energy is V_m itself.
SINGLE = PairOccupations("single", Fraction(1, 3), FERMIONS, MOMENTA, 1.5 * np.eye(len(MOMENTA)))

# Orbit and hole (stretch, angle): mass ratio 100 and aspect ratio 30, aligned, crossed and turned, 4 apart at most.
METRICS = [
    ((0.0, 0.0), (0.0, 0.0)),
    ((math.log(10.0), 0.4), (0.0, 0.0)),
    ((math.log(10.0), 0.4), (math.log(30.0), 0.4)),
    ((math.log(10.0), 0.4), (math.log(30.0), 0.7)),
    ((math.log(10.0), 0.4), (1.6, -1.0)),
    ((3.4, -0.2), (-0.5, -0.2)),
]


def pair_energy_gaussian(width: float, level: int, orbit: mpmath.matrix, hole: mpmath.matrix, m: int) -> float:
    """int d^2q/(2 pi)^2 2 pi e^(-q^2 s^2/2) F_n^2 L_m(|q|_g^2) e^(-|q|_g^2/2), matrices being inverse metrics.

    With the generating functions of Laguerre polynomials, (1/(1-t)) e^(-t x/(1-t)), and of Legendre polynomials (DLMF
    18.12.13 and 18.12.11): sum_m t^m V_m = 1/sqrt(a + b t + c t^2), so V_m = a^(-1/2) (c/a)^(m/2) P_m(-b/(2 sqrt(ac))).
    Powers of |q|_L^2/2 in the polynomial L_n are derivatives by its scale.
    """

    def lowest(scale: mpmath.mpf) -> mpmath.mpf:
        form = width**2 * mpmath.eye(2) + scale * orbit
        determinant = mpmath.det(form)
        trace = form[0, 0] * hole[1, 1] + form[1, 1] * hole[0, 0] - 2 * form[0, 1] * hole[0, 1]
        a, b, c = determinant + trace + 1, 2 - 2 * determinant, determinant - trace + 1
        root = mpmath.sqrt(mpmath.mpc(c / a))
        return mpmath.re(root**m * mpmath.legendre(m, -b / (2 * a * root)) / mpmath.sqrt(a))

    polynomial = {0: [1], 1: [1, 2, 1], 2: [1, 4, 5, 2, mpmath.mpf(1) / 4]}[level]
    with mpmath.workdps(40):
        return float(sum(weight * mpmath.diff(lowest, 1, order) for order, weight in enumerate(polynomial)))


def inverse_matrix(metric: tuple[float, float]) -> NDArray[np.float64]:
    return np.linalg.inv(stretched(math.exp(metric[0]), metric[1]))


@pytest.mark.parametrize("level", [0, 1, 2])
@pytest.mark.parametrize("width", [0.3, 2.0])
@pytest.mark.parametrize(("orbit", "hole"), METRICS)
def test_gaussian_pair_energies(
    orbit: tuple[float, float], hole: tuple[float, float], width: float, level: int
) -> None:
    problem = Problem(UnimodularMetric(*orbit), Gaussian(width), level)
    found = interaction_energy(SINGLE).energies(problem, UnimodularMetric(*hole))
    matrices = [mpmath.matrix(inverse_matrix(metric).tolist()) for metric in (orbit, hole)]
    exact = [pair_energy_gaussian(width, level, *matrices, int(m)) for m in MOMENTA]
    np.testing.assert_allclose(found, exact, atol=1e-10)
    if orbit != hole and level:
        crossed = [pair_energy_gaussian(width, level, *matrices[::-1], int(m)) for m in MOMENTA]
        assert np.max(np.abs(found - crossed)) > 1e-4


def coulomb_pair_energies(orbit: NDArray[np.float64], hole: NDArray[np.float64], n_angles: int) -> NDArray[np.float64]:
    """The same of 2 pi/q in the lowest level, by equidistant angles in the lab.

    Along a direction sum_m t^m int dq e^(-(A + B (1+t)/(1-t)) q^2/2)/(1-t) = sqrt(pi/2)/sqrt((1-t)(A + B + (B - A) t)),
    A and B the forms of orbit and hole; the coefficients y_m of 1/sqrt(1 - b t - c t^2) obey
    m y_m = (m - 1/2) b y_(m-1) + (m - 1) c y_(m-2).
    """
    phi = math.pi * np.arange(n_angles) / n_angles
    u = np.stack([np.cos(phi), np.sin(phi)])
    in_orbit, in_hole = (np.einsum("ai,ab,bi->i", u, matrix, u) for matrix in (orbit, hole))
    total, ratio = in_orbit + in_hole, (in_hole - in_orbit) / (in_orbit + in_hole)
    linear, quadratic = 1.0 - ratio, ratio
    before, value, found = np.zeros(n_angles), math.sqrt(0.5 * math.pi) / np.sqrt(total), []
    for m in range(MOMENTA[-1] + 1):
        if m in MOMENTA:
            found.append(value.mean())
        following = ((m + 0.5) * linear * value + m * quadratic * before) / (m + 1)
        before, value = value, following
    return np.array(found)


@pytest.mark.parametrize(("orbit", "hole"), METRICS)
def test_coulomb_pair_energies(orbit: tuple[float, float], hole: tuple[float, float]) -> None:
    problem = Problem(UnimodularMetric(*orbit), Coulomb())
    found = interaction_energy(SINGLE).energies(problem, UnimodularMetric(*hole))
    matrices = [inverse_matrix(metric) for metric in (orbit, hole)]
    exact = coulomb_pair_energies(*matrices, 4096)
    assert np.max(np.abs(exact - coulomb_pair_energies(*matrices, 2048))) < 1e-12
    np.testing.assert_allclose(found, exact, atol=1e-10)
    if orbit != hole:
        assert np.max(np.abs(found - coulomb_pair_energies(*matrices[::-1], 4096))) > 1e-4


def test_isotropic_pair_energies_are_haldanes() -> None:
    """V_m = Gamma(m + 1/2)/(2 m!): Haldane, Phys. Rev. Lett. 51, 605 (1983), from memory."""
    exact = [math.gamma(m + 0.5) / (2.0 * math.factorial(m)) for m in MOMENTA.tolist()]
    np.testing.assert_allclose(coulomb_pair_energies(np.eye(2), np.eye(2), 16), exact, rtol=1e-12)


@pytest.mark.parametrize("ratio", [100.0, 1000.0])
@pytest.mark.parametrize("width", [0.2, 1.0, 4.0])
def test_gaussian_interaction_has_its_exact_hole_at_extreme_masses(third: Liquid, ratio: float, width: float) -> None:
    """e^(2 Q*) = (s^2 + e^Q_m)/(s^2 + e^-Q_m), found however far from the orbit."""
    stretch = 0.5 * math.log(ratio)
    exact = 0.5 * math.log((width**2 + math.exp(stretch)) / (width**2 + math.exp(-stretch)))
    minimum = find_minimum(
        EnergySurface(third.occupations, Problem(mass_metric_from_ratio(ratio, 0.3), Gaussian(width)))
    )
    assert minimum.interior
    assert minimum.stretch.value == pytest.approx(exact, abs=1e-8)
    assert minimum.angle.value == pytest.approx(0.3, abs=1e-8)


@pytest.mark.parametrize(("orbit", "hole"), [((math.log(10.0), 0.4), (-1.8, 0.4)), ((0.0, 0.0), (4.2, 0.1))])
def test_metrics_farther_apart_are_refused(orbit: tuple[float, float], hole: tuple[float, float]) -> None:
    with pytest.raises(GeometryError, match="at most 4 works"):
        interaction_energy(SINGLE).energies(Problem(UnimodularMetric(*orbit), Coulomb()), UnimodularMetric(*hole))


def test_interaction_farther_from_the_orbit_is_refused() -> None:
    problem = Problem(UnimodularMetric(math.log(10.0)), Coulomb(UnimodularMetric(-3.0)))
    with pytest.raises(GeometryError, match=r"interaction and orbit metric are 5.3 .*at most 4 works"):
        find_minimum(EnergySurface(SINGLE, problem))
    line = {"angle_degrees": None, "stretch": {"from": 0.0, "to": 1.0, "points": 3}}
    with pytest.raises(ConfigError, match=r"problem.interaction: .* 5.3 apart .*at most 4 works"):
        require_reach(problem, line)
    require_reach(Problem(UnimodularMetric(math.log(10.0)), Coulomb(UnimodularMetric(-1.5))), line)
