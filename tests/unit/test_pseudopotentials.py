"""Pair energies through the quadrature of all energies, against closed forms, tables and other quadratures.

A liquid with a single c_m has E - background = 2 nu c_m V_m, V_m = int d^2q/(2 pi)^2 V(q) F_n(q; g_L)^2
L_m(|q|_g^2) exp(-|q|_g^2/2) (Haldane, Phys. Rev. Lett. 51, 605 (1983), for the isotropic ones).
"""

import math
from fractions import Fraction

import mpmath
import numpy as np
import pytest
from scipy import integrate
from scipy.special import eval_laguerre

from mcgeo.errors import GeometryError
from mcgeo.estimate.occupations import PairOccupations
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import Coulomb, Gaussian
from mcgeo.problem.problem import Problem
from mcgeo.variational.energy_surface import EnergySurface

NU = Fraction(1, 3)


def surface(problem, momenta, samples, statistics="fermions"):
    return EnergySurface(PairOccupations("pairs", NU, statistics, np.array(momenta), np.array(samples)), problem)


def pair_energies(problem, hole, momenta, largest=15):
    """V_m of the momenta of one parity, in the company of basis functions up to ``largest`` as a fit has them."""
    basis = np.arange(momenta[0] % 2, largest + 1, 2)
    unit = np.eye(len(basis))
    samples = np.concatenate([np.zeros((1, len(basis))), 3.0 * unit])
    found = surface(problem, basis, samples, "bosons" if basis[0] == 0 else "fermions").sample_energies(hole)
    energies = (found[1:] - found[0]) / (2.0 * float(NU) * 3.0)
    return energies[np.searchsorted(basis, momenta)]


def coulomb_lowest_level(m):
    """Gamma(m + 1/2)/(2 m!)."""
    return float(mpmath.gamma(m + 0.5) / (2 * mpmath.factorial(m)))


@pytest.mark.parametrize("largest", [9, 25, 45])
@pytest.mark.parametrize("parity", [0, 1])
def test_coulomb_in_the_lowest_level(parity, largest):
    momenta = np.arange(parity, largest + 1, 2)
    found = pair_energies(Problem(ISOTROPIC, Coulomb()), ISOTROPIC, momenta, largest)
    np.testing.assert_allclose(found, [coulomb_lowest_level(m) for m in momenta.tolist()], rtol=1e-11)


# Exact values computed independently of this package, by quadrature at 25 digits.
COULOMB_LEVEL_1 = {
    0: 0.609281011249, 1: 0.415418871306, 2: 0.450037110581, 3: 0.315025977407, 4: 0.263531346485,
    5: 0.232158567141, 6: 0.210143530602, 7: 0.193510548450, 9: 0.169565984561, 11: 0.152811825894,
}  # fmt: skip


@pytest.mark.parametrize("parity", [0, 1])
def test_coulomb_in_level_1(parity):
    momenta = [m for m in COULOMB_LEVEL_1 if m % 2 == parity]
    found = pair_energies(Problem(ISOTROPIC, Coulomb(), 1), ISOTROPIC, momenta)
    np.testing.assert_allclose(found, [COULOMB_LEVEL_1[m] for m in momenta], atol=1e-12)
    # [Gamma(m + 1/2)/(2 m!)] (8 m - 3)(8 m - 11)/(64 (m - 1/2)(m - 3/2)), from memory.
    closed = [
        coulomb_lowest_level(m) * (8 * m - 3) * (8 * m - 11) / (64 * (m - 0.5) * (m - 1.5)) for m in momenta
    ]
    np.testing.assert_allclose(found, closed, atol=1e-12)


@pytest.mark.parametrize("width", [0.5, 1.0, 2.0])
@pytest.mark.parametrize("parity", [0, 1])
def test_gaussian_in_the_lowest_level(parity, width):
    # int dt/2 L_m(t) exp(-p t) = (p - 1)^m/(2 p^(m+1)) with p = 1 + s^2/2.
    momenta = np.arange(parity, 16, 2)
    p = 1.0 + width**2 / 2.0
    found = pair_energies(Problem(ISOTROPIC, Gaussian(width)), ISOTROPIC, momenta)
    np.testing.assert_allclose(found, (p - 1.0) ** momenta / (2.0 * p ** (momenta + 1.0)), rtol=1e-10, atol=2e-14)


# Coulomb pairs of the isotropic relative oscillator seen through the orbit of the mass metric diag(a, 1/a);
# exact values computed independently of this package, by quadrature.
ANISOTROPIC = [
    (1.5, {0: 0.87498042, 1: 0.44191542, 3: 0.27846774, 5: 0.21870134}),
    (2.0, {0: 0.85409594, 1: 0.43930522, 3: 0.28113930, 5: 0.21999797}),
    (4.0, {0: 0.76949831, 1: 0.42379043, 3: 0.28892459, 5: 0.22651391}),
]


@pytest.mark.parametrize("angle", [0.0, 0.8])
@pytest.mark.parametrize(("a", "table"), ANISOTROPIC)
def test_isotropic_pairs_seen_through_an_anisotropic_orbit(a, table, angle):
    problem = Problem(UnimodularMetric(math.log(a), angle), Coulomb())
    for momenta in ([0], [1, 3, 5]):
        found = pair_energies(problem, ISOTROPIC, momenta)
        np.testing.assert_allclose(found, [table[m] for m in momenta], rtol=0.0, atol=6e-9)


def pair_energy_by_quadrature(problem, hole, m):
    """V_m by adaptive quadrature over the lab's wavevectors in polar coordinates."""
    orbit, g = np.linalg.inv(problem.mass_metric.matrix), np.linalg.inv(hole.matrix)

    def integrand(q, phi):
        u = np.array([math.cos(phi), math.sin(phi)])
        x, y = q * q * (u @ orbit @ u), q * q * (u @ g @ u)
        form = eval_laguerre(problem.level, x / 2.0) ** 2 * math.exp(-x / 2.0)
        return q * float(problem.interaction.potential(q * u)) * form * eval_laguerre(m, y) * math.exp(-y / 2.0)

    # Half a turn, from the angle of the hole on; the Gaussians of either metric end every ray.
    value = 0.0
    for phi_0, phi_1 in [(0.0, math.pi / 4), (math.pi / 4, math.pi / 2), (math.pi / 2, math.pi)]:
        value += integrate.dblquad(
            integrand, phi_0 + hole.angle, phi_1 + hole.angle, 1e-12, 40.0, epsabs=1e-11, epsrel=1e-9
        )[0]
    return 2.0 * value / (2.0 * math.pi) ** 2


PAIRS = [
    (UnimodularMetric(0.5, 0.2), UnimodularMetric(0.4, -0.6), Coulomb(), 0, 1),
    (UnimodularMetric(0.7, 0.4), UnimodularMetric(1.1, 1.5), Coulomb(), 0, 3),
    (UnimodularMetric(1.0, 0.1), UnimodularMetric(2.0, 1.6), Coulomb(), 0, 5),
    (UnimodularMetric(0.6, -0.5), UnimodularMetric(0.9, 0.7), Coulomb(), 1, 1),
    (ISOTROPIC, UnimodularMetric(1.6, 0.3), Gaussian(1.0), 0, 2),
    (UnimodularMetric(1.2, 0.9), UnimodularMetric(1.0, 0.0), Gaussian(0.6), 1, 4),
]


@pytest.mark.parametrize(("mass", "hole", "interaction", "level", "m"), PAIRS)
def test_any_two_metrics(mass, hole, interaction, level, m):
    problem = Problem(mass, interaction, level)
    exact = pair_energy_by_quadrature(problem, hole, m)
    assert pair_energies(problem, hole, [m])[0] == pytest.approx(exact, abs=1e-8)
    assert pair_energies(problem, hole, [m], 44 + m % 2)[0] == pytest.approx(exact, abs=1e-8)
    # A hole a little more stretched has another energy.
    another = UnimodularMetric(hole.stretch + 0.01, hole.angle)
    assert abs(pair_energies(problem, another, [m])[0] - exact) > 1e-6


def test_the_metrics_reach_a_relative_stretch_of_three():
    mass, hole = PAIRS[2][:2]
    assert 2.9 < mass.distance(hole) < 3.1
    with pytest.raises(GeometryError, match="apart"):
        pair_energies(Problem(UnimodularMetric(2.1), Coulomb()), UnimodularMetric(-2.1), [1])


@pytest.mark.parametrize("level", [0, 1])
@pytest.mark.parametrize("mass", [ISOTROPIC, UnimodularMetric(math.log(2.0), 0.4)])
def test_background_is_the_filled_level(mass, level):
    # nu = 1 has c_m = 0 for all m: E = -sqrt(pi/8) (Jancovici, Phys. Rev. Lett. 46, 386 (1981)), 3/4 of it in
    # level 1; an orbit metric averages 1/|q| over angles, 1/AGM(gamma^1/2, gamma^-1/2). Bosons have the opposite sign.
    expected = -math.sqrt(math.pi / 8.0) * (0.75 if level else 1.0) / float(
        mpmath.agm(math.exp(mass.stretch / 2.0), math.exp(-mass.stretch / 2.0))
    )
    problem = Problem(mass, Coulomb(), level)
    for statistics, sign, momenta in [("fermions", 1.0, [1, 3]), ("bosons", -1.0, [0, 2])]:
        background = surface(problem, momenta, np.zeros((1, 2)), statistics).energy(UnimodularMetric(0.9, 0.1))
        assert background == pytest.approx(sign * float(NU) * expected, abs=1e-12)
