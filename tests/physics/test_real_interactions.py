"""Energies of real samples: pseudopotentials, anisotropic matrix elements, changes of frame, limits.

All go through the quadrature of the energy surface, with occupations that are made up: no sampling is needed.
"""

from __future__ import annotations

import math
from fractions import Fraction

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.special import eval_laguerre

from mcgeo.estimate.occupations import PairOccupations
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.combination import Combination
from mcgeo.problem.coulomb import Coulomb
from mcgeo.problem.dipole import Dipole
from mcgeo.problem.finite_width import FangHoward, GaussianWell, Softened, SquareWell
from mcgeo.problem.gaussian import Gaussian
from mcgeo.problem.pair_potential import Interaction
from mcgeo.problem.power_law import PowerLaw
from mcgeo.problem.problem import Problem
from mcgeo.problem.pseudopotential_sum import PseudopotentialSum
from mcgeo.problem.screened import OneGate, TwoGates, Yukawa
from mcgeo.runs.liquid import Liquid
from mcgeo.variational.energy_surface import EnergySurface
from mcgeo.variational.minimum import find_minimum
from tests.physics.checks import require_agreement

Array = NDArray[np.float64]
NU = Fraction(1, 3)


def liquid(largest: int = 35) -> PairOccupations:
    """A liquid like Laughlin's at 1/3: no pairs of momentum 1, a few too many of 3, ripples beyond."""
    m = np.arange(1, largest + 1, 2)
    ripples = 0.8 * np.cos(1.3 * m) * np.exp(-m / 6.0)
    c = np.where(m == 1, -1.0, np.where(m == 3, 0.5, ripples))
    return PairOccupations("made up", NU, "fermions", m, np.stack([c, c]))


def pair_energies(problem: Problem, hole: UnimodularMetric, momenta: list[int]) -> Array:
    """V_m = (E - background)/(2 nu c_m) of liquids with a single c_m."""
    found = {}
    for parity, statistics in ((0, "bosons"), (1, "fermions")):
        basis = np.arange(parity, 16, 2)
        samples = np.concatenate([np.zeros((1, len(basis))), np.eye(len(basis))])
        surface = EnergySurface(PairOccupations("pairs", NU, statistics, basis, samples), problem)
        energies = surface.sample_energies(hole)
        found |= dict(zip(basis.tolist(), (energies[1:] - energies[0]) / (2.0 * float(NU)), strict=True))
    return np.array([found[m] for m in momenta])


# V_0, V_1, V_2, V_3, V_5, V_7 of the lowest level, computed independently of this package by quadrature at 25 digits;
# the form factors of the layers were derived anew by double integration over the densities.
LOWEST_LEVEL: list[tuple[Interaction, list[float]]] = [
    (Softened(0.5), [0.6827018525, 0.4236820605, 0.3258559139, 0.2735846396, 0.2166002353, 0.1847553265]),
    (Softened(1.0), [0.5456413608, 0.3864103402, 0.3097116327, 0.2644845862, 0.2123373272, 0.1821866967]),
    (Softened(2.0), [0.3789360781, 0.3105319610, 0.2671010293, 0.2370611683, 0.1978691749, 0.1730152098]),
    (FangHoward(1.0), [0.4742751154, 0.3339735533, 0.2744028219, 0.2390581731, 0.1969268215, 0.1715659193]),
    (FangHoward(2.0), [0.6039743436, 0.3895396004, 0.3079239426, 0.2623565137, 0.2107551219, 0.1810483997]),
    (FangHoward(3.0), [0.6704291640, 0.4110123157, 0.3190680295, 0.2694036214, 0.2144859855, 0.1834383403]),
    (SquareWell(1.0), [0.7955061670, 0.4376112705, 0.3306081631, 0.2760595973, 0.2177026984, 0.1854084121]),
    (SquareWell(2.0), [0.7243064493, 0.4257941581, 0.3260564736, 0.2735828996, 0.2165667787, 0.1847286227]),
    (SquareWell(4.0), [0.6189800918, 0.3968408223, 0.3123640228, 0.2654015438, 0.2125023864, 0.1822127136]),
    (OneGate(1.0), [0.5072908474, 0.1325815018, 0.0652340678, 0.0398847459, 0.0202257325, 0.0126250984]),
    (OneGate(2.0), [0.6598884005, 0.2352983002, 0.1394270002, 0.0963130792, 0.0565557402, 0.0383545506]),
    (OneGate(5.0), [0.7881174947, 0.3467945156, 0.2377148411, 0.1839399418, 0.1280899879, 0.0983695996]),
    (TwoGates(1.0), [0.3991804546, 0.0655558832, 0.0202896522, 0.0078638846, 0.0016683488, 0.0004619871]),
    (TwoGates(2.0), [0.5813868518, 0.1702207607, 0.0845853639, 0.0494516676, 0.0211565114, 0.0106310885]),
    (TwoGates(5.0), [0.7509913182, 0.3110778670, 0.2033221215, 0.1507927827, 0.0972239588, 0.0695402823]),
    (Yukawa(1.0), [0.3789360781, 0.0684041171, 0.0249731854, 0.0115821147, 0.0034981457, 0.0013469926]),
]


@pytest.mark.parametrize(("interaction", "table"), LOWEST_LEVEL)
def test_pseudopotentials_of_the_lowest_level(interaction: Interaction, table: list[float]) -> None:
    found = pair_energies(Problem(ISOTROPIC, interaction), ISOTROPIC, [0, 1, 2, 3, 5, 7])
    np.testing.assert_allclose(found, table, rtol=0.0, atol=1e-10)


@pytest.mark.parametrize("k", [0.01, 0.3, 1.0, 4.0])
def test_contact_energy_in_closed_form(k: float) -> None:
    # int dq q e^(-q^2)/sqrt(q^2 + k^2) = int dq e^(-q^2 - 2kq) = (sqrt(pi)/2) e^(k^2) erfc(k).
    exact = float(mpmath.sqrt(mpmath.pi) / 2 * mpmath.exp(mpmath.mpf(k) ** 2) * mpmath.erfc(k))
    for interaction in (Yukawa(k), Softened(2.0 * k)):
        assert pair_energies(Problem(ISOTROPIC, interaction), ISOTROPIC, [0])[0] == pytest.approx(exact, rel=1e-10)


@pytest.mark.parametrize("p", [0.1, 0.4, 1.0, 1.5, 1.95])
def test_power_law_in_closed_form(p: float) -> None:
    # The relative density of momentum m is (r^2/4)^m e^(-r^2/4)/(4 pi m!): V_m = 2^-p Gamma(m + 1 - p/2)/m!.
    momenta = [0, 1, 2, 5, 9]
    exact = [2.0**-p * math.gamma(m + 1.0 - p / 2.0) / math.factorial(m) for m in momenta]
    found = pair_energies(Problem(ISOTROPIC, PowerLaw(p)), ISOTROPIC, momenta)
    np.testing.assert_allclose(found, exact, rtol=1e-9)


# Coulomb pairs on the oscillator of an isotropic metric, through an orbit of the metric diag(a, 1/a): diagonal
# elements V_1, V_3, V_5 and the off-diagonal V_13, V_35, V_57 that go with cos(2 theta). Computed independently of
# this package by quadrature.
ANISOTROPIC = [
    (1.5, [0.44191542, 0.27846774, 0.21870134], [0.01368057, 0.00496783, 0.00266756]),
    (2.0, [0.43930522, 0.28113930, 0.21999797], [0.02308586, 0.00926671, 0.00495120]),
    (4.0, [0.42379043, 0.28892459, 0.22651391], [0.04217803, 0.02312447, 0.01363000]),
]


@pytest.mark.parametrize(("a", "diagonal", "off_diagonal"), ANISOTROPIC)
def test_anisotropic_matrix_elements(a: float, diagonal: list[float], off_diagonal: list[float]) -> None:
    stretch = math.log(a)
    # The frame of the orbit's metric turns the orbit's shape into one of the dielectric and of the pairs.
    through_orbit = Problem(UnimodularMetric(stretch, 0.3), Coulomb()), ISOTROPIC
    in_dielectric = Problem(ISOTROPIC, Coulomb(UnimodularMetric(-stretch, 0.3))), UnimodularMetric(-stretch, 0.3)
    for problem, hole in (through_orbit, in_dielectric):
        np.testing.assert_allclose(pair_energies(problem, hole, [1, 3, 5]), diagonal, rtol=0.0, atol=6e-9)
        # Stretching the pairs squeezes their oscillator, dV_m/dQ = sqrt((m+1)(m+2))/2 V_m,m+2 - sqrt(m(m-1))/2
        # V_m-2,m: up to a sign that the orbit's direction fixes.
        steps = {
            s: pair_energies(problem, hole.displaced(s * math.cos(0.6), s * math.sin(0.6)), [1, 3, 5])
            for s in (-2e-3, -1e-3, 1e-3, 2e-3)
        }
        slope = (8.0 * (steps[1e-3] - steps[-1e-3]) - steps[2e-3] + steps[-2e-3]) / 12e-3
        v_13, v_35, v_57 = off_diagonal
        expected = [
            math.sqrt(6.0) / 2.0 * v_13,
            math.sqrt(20.0) / 2.0 * v_35 - math.sqrt(6.0) / 2.0 * v_13,
            math.sqrt(42.0) / 2.0 * v_57 - math.sqrt(20.0) / 2.0 * v_35,
        ]
        np.testing.assert_allclose(np.abs(slope), np.abs(expected), atol=6e-8)


@pytest.mark.parametrize("level", [0, 1])
@pytest.mark.parametrize("stretch", [0.3, 0.9])
def test_dielectric_instead_of_mass_is_a_change_of_frame(stretch: float, level: int) -> None:
    # In coordinates in which the dielectric is isotropic the isotropic mass has the inverse metric.
    metric, occupations = UnimodularMetric(stretch, 0.2), liquid()
    problems = [Problem(ISOTROPIC, Coulomb(metric), level), Problem(metric, Coulomb(), level)]
    dielectric, mass = (find_minimum(EnergySurface(occupations, problem)) for problem in problems)
    assert dielectric.interior and mass.interior
    assert dielectric.energy.value == pytest.approx(mass.energy.value, abs=1e-11)
    # In level 1 the hole overdoes the mass, so that a dielectric turns it by a right angle.
    assert mass.angle.value == pytest.approx(0.2, abs=1e-6)
    assert (mass.stretch.value > stretch) == (level == 1)
    assert dielectric.metric.distance(UnimodularMetric(stretch - mass.stretch.value, 0.2)) < 1e-6


@pytest.mark.parametrize("level", [0, 1])
def test_mass_and_dielectric_of_one_metric(level: int) -> None:
    metric, occupations = UnimodularMetric(1.7, -0.4), liquid()
    isotropic = EnergySurface(occupations, Problem(ISOTROPIC, Coulomb(), level)).energy(ISOTROPIC)
    stretched = EnergySurface(occupations, Problem(metric, Coulomb(metric), level)).energy(metric)
    assert stretched == pytest.approx(isotropic, abs=1e-11)


EVERY_KIND: list[Interaction] = [
    Coulomb(UnimodularMetric(1.0, 0.4)),
    Coulomb(UnimodularMetric(2.0, -0.2)),
    Gaussian(0.5),
    OneGate(40.0),
    TwoGates(0.2),
    TwoGates(40.0),
    Yukawa(1e-3),
    Yukawa(2.0),
    SquareWell(5.0),
    FangHoward(0.3),
    GaussianWell(2.0),
    Softened(10.0),
    PowerLaw(0.3),
    PowerLaw(1.8),
    Dipole(0.2),
    Dipole(0.2, 1.0, 0.5),
    PseudopotentialSum({1: 1.0, 3: 0.3}, UnimodularMetric(1.0, 0.4)),
    PseudopotentialSum({2: 0.5, 9: 1.0, 15: 0.3}, UnimodularMetric(0.6, 1.0)),
    Combination(
        ((0.5, PowerLaw(0.7)), (-0.2, Coulomb(UnimodularMetric(0.6, 1.0))), (1.0, PseudopotentialSum({1: 1.0})))
    ),
]


def fine_energy(occupations: PairOccupations, problem: Problem, hole: UnimodularMetric) -> float:
    """1/2 int d^2q/(2 pi)^2 v (Sbar - 1) over lab wavevectors: panels halving towards q = 0, 600 directions."""
    nodes, weights = np.polynomial.legendre.leggauss(24)
    edges = np.concatenate([[0.0], 0.5 ** np.arange(150, 0, -1), np.arange(1.0, 34.0, 0.75)])
    half = 0.5 * np.diff(edges)[:, None]
    q, dq = (edges[:-1, None] + half * (nodes + 1.0)).ravel(), (half * weights).ravel()
    angles = math.pi * (np.arange(600) + 0.25) / 600
    total = 0.0
    for angle in angles:
        wave = q[:, None] * np.array([math.cos(angle), math.sin(angle)])
        norm_sq = hole.wavevector_norm_sq(wave)
        correlations = np.full_like(q, -float(NU))
        for m, c in zip(occupations.m, occupations.coefficients, strict=True):
            correlations += 4.0 * float(NU) * c * eval_laguerre(m, norm_sq) * np.exp(-0.5 * norm_sq)
        total += float(np.sum(dq * q * problem.effective_potential(wave) * correlations))
    return total / (4.0 * math.pi * len(angles))


@pytest.mark.parametrize("interaction", EVERY_KIND)
@pytest.mark.parametrize(
    ("mass", "hole"),
    [((0.0, 0.0), (0.0, 0.0)), ((0.4, 0.3), (1.6, 1.7)), ((1.2, 0.1), (1.2, 0.1))],
)
def test_quadrature_resolves_every_kind(
    interaction: Interaction, mass: tuple[float, float], hole: tuple[float, float]
) -> None:
    occupations, metric = liquid(15), UnimodularMetric(*hole)
    problem = Problem(UnimodularMetric(*mass), interaction)
    found = EnergySurface(occupations, problem).energy(metric)
    exact = fine_energy(occupations, problem, metric)
    assert found == pytest.approx(exact, abs=1e-9)
    assert abs(EnergySurface(occupations, problem).energy(metric.displaced(0.05, 0.0)) - exact) > 1e-7


LIMITS = [SquareWell(1e-9), GaussianWell(1e-9), Softened(1e-9), FangHoward(1e10), OneGate(1e10), TwoGates(1e10)]


@pytest.mark.parametrize("interaction", [*LIMITS, Yukawa(1e-10), PowerLaw(1.0)])
def test_limits_are_coulomb(interaction: Interaction) -> None:
    occupations, mass, hole = liquid(), UnimodularMetric(0.5, 0.3), UnimodularMetric(0.8, 1.0)
    coulomb = EnergySurface(occupations, Problem(mass, Coulomb())).energy(hole)
    assert EnergySurface(occupations, Problem(mass, interaction)).energy(hole) == pytest.approx(coulomb, abs=1e-8)


@pytest.mark.parametrize("level", [0, 1])
@pytest.mark.parametrize("mass", [ISOTROPIC, UnimodularMetric(0.9, 0.5)])
def test_pseudopotentials_take_the_hole_into_their_metric(mass: UnimodularMetric, level: int) -> None:
    # Without pairs of momentum 1 nothing is left to gain: whatever the orbit, the hole is that of the interaction.
    metric = UnimodularMetric(0.7, -0.6)
    minimum = find_minimum(EnergySurface(liquid(), Problem(mass, PseudopotentialSum({1: 1.0}, metric), level)))
    assert minimum.interior
    assert minimum.metric.distance(metric) < 1e-8
    # The background of a filling nu has (-1)^m v_m of every momentum, and n_1 = 0 takes 2 nu v_1 away.
    assert minimum.energy.value == pytest.approx(-float(NU) * (-1.0) - 2.0 * float(NU), abs=1e-11)


@pytest.mark.parametrize("direction", [0.0, 0.7, -1.2])
def test_tilted_dipoles_turn_the_hole(direction: float) -> None:
    # Dipoles repel less along the direction to which they lean: neighbours come closer, the hole is short along it.
    minimum = find_minimum(EnergySurface(liquid(), Problem(ISOTROPIC, Dipole(0.3, 0.4, direction))))
    assert minimum.interior
    assert math.remainder(minimum.angle.value - direction, math.pi) == pytest.approx(0.0, abs=1e-6)
    assert minimum.stretch.value > 0.05
    upright = find_minimum(EnergySurface(liquid(), Problem(ISOTROPIC, Dipole(0.3))))
    assert upright.metric == ISOTROPIC


ON_TORUS = [
    (Coulomb(UnimodularMetric(0.5, 0.3)), 2e-4),
    (OneGate(2.0), 2e-5),
    (TwoGates(2.0), 2e-5),
    (Yukawa(0.5), 2e-5),
    (SquareWell(2.0), 2e-4),
    (FangHoward(2.0), 2e-4),
    (PowerLaw(1.5), 5e-5),
    (Dipole(0.3, 0.5), 5e-5),
    (Combination(((0.5, OneGate(1.0)), (2.0, Gaussian(1.0)))), 2e-5),
]


@pytest.mark.parametrize(("interaction", "tolerance"), ON_TORUS)
def test_torus_and_plane_agree(third: Liquid, interaction: Interaction, tolerance: float) -> None:
    # Two roads to one number; the finite cell costs N^(-3/2), and little where V(q) is finite at q = 0.
    on_torus = third.torus_energy(interaction)
    plane = EnergySurface(third.occupations, Problem(ISOTROPIC, interaction)).energy(ISOTROPIC)
    require_agreement(on_torus.value, on_torus.error, plane, tolerance)
    # The self-energy is no small part of it.
    assert abs(interaction.self_energy(third.frame.lab)) > 20.0 * (tolerance + 4.0 * on_torus.error)
