"""Sums of pseudopotentials: their values are found again, through any orbit, and zero modes cost nothing."""

import math
from fractions import Fraction

import numpy as np
import pytest
from scipy import integrate
from scipy.special import eval_laguerre

from mcgeo.estimate.occupations import PairOccupations
from mcgeo.estimate.torus_energy import projected_torus_energy, torus_energy
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.combination import Combination
from mcgeo.problem.coulomb import Coulomb
from mcgeo.problem.landau_level import form_factor_sq
from mcgeo.problem.problem import Problem
from mcgeo.problem.pseudopotential_sum import PseudopotentialSum
from mcgeo.variational.energy_surface import EnergySurface

VALUES = {0: 0.3, 1: 1.0, 3: -0.2, 6: 0.5}
METRIC = UnimodularMetric(0.8, 0.4)


@pytest.mark.parametrize("m", range(8))
def test_projection_on_each_momentum_is_its_value(m):
    interaction = PseudopotentialSum(VALUES)

    def integrand(q):
        v = interaction.guiding_centre_potential(np.array([q, 0.0]), np.ones(()))
        return q / (2.0 * math.pi) * float(v) * eval_laguerre(m, q * q) * math.exp(-q * q / 2.0)

    found = integrate.quad(integrand, 0.0, 14.0, epsabs=1e-12, limit=200)[0]
    assert found == pytest.approx(VALUES.get(m, 0.0), abs=1e-10)


@pytest.mark.parametrize("level", [0, 1])
@pytest.mark.parametrize("mass", [ISOTROPIC, UnimodularMetric(1.3, -0.7)])
def test_orbits_do_not_matter(mass, level):
    waves = np.array([[0.3, 0.1], [-1.0, 2.0], [0.0, 3.0]])
    interaction = PseudopotentialSum(VALUES, METRIC)
    norm_sq = METRIC.wavevector_norm_sq(waves)
    expected = 4.0 * math.pi * sum(v * eval_laguerre(m, norm_sq) for m, v in VALUES.items()) * np.exp(-norm_sq / 2.0)
    np.testing.assert_allclose(Problem(mass, interaction, level).effective_potential(waves), expected, rtol=1e-13)
    # Electrons in the lowest level whose orbit has the metric see V(q).
    dressed = interaction.potential(waves) * form_factor_sq(waves, 0, METRIC)
    np.testing.assert_allclose(dressed, expected, rtol=1e-13)


def laughlin_like(largest=25):
    m = np.arange(1, largest + 1, 2)
    c = np.where(m < 3, -1.0, 0.4 * np.exp(-m / 6.0))
    return PairOccupations("third", Fraction(1, 3), "fermions", m, c[None])


@pytest.mark.parametrize("stretch", [0.0, 1.0, 2.0])
@pytest.mark.parametrize("mass", [ISOTROPIC, UnimodularMetric(1.0, 0.3)])
def test_energy_over_the_metric(mass, stretch):
    """With the hole in the interaction's metric occupations alone tell the energy.

    The background is (e nu/2) int d^2q/(2 pi)^2 v = e nu sum (-1)^m v_m, and c_m adds 2 nu c_m v_m.
    """
    metric, liquid = UnimodularMetric(stretch, -0.3), laughlin_like()
    values = {1: 1.0, 3: 0.2, 4: 0.1, 15: 0.3}
    nu = 1.0 / 3.0
    background = -nu * sum((-1) ** m * v for m, v in values.items())
    exact = background + sum(
        2.0 * nu * c * values.get(int(m), 0.0) for m, c in zip(liquid.m, liquid.coefficients, strict=True)
    )
    surface = EnergySurface(liquid, Problem(mass, PseudopotentialSum(values, metric)))
    assert surface.energy(metric) == pytest.approx(exact, abs=1e-10)
    assert abs(surface.energy(metric.displaced(0.1, 0.0)) - exact) > 1e-4


@pytest.mark.parametrize("tau", [1j, complex(0.3, 1.5)])
def test_a_state_without_pairs_costs_nothing_on_a_torus(tau):
    """A zero mode has sum_q v(q) <rho_q rho_-q - N> = 0 over all q; its energy is that of the background, -nu v_1."""
    v_1, n = 0.7, 2
    cell = Cell.from_tau(tau, 3 * n)
    interaction = PseudopotentialSum({1: v_1})
    # q = 0, which the energy leaves out, is v(0) (N^2 - N) of the sum.
    others = -4.0 * math.pi * v_1 * (n * n - n)
    energy = others / (2.0 * cell.area * n) + 0.5 * interaction.self_energy(cell)
    assert energy == pytest.approx(-v_1 / 3.0, abs=1e-14)


def test_the_torus_of_the_same_metric_needs_no_projection():
    # Orbit and hole of the interaction's metric: product state and guiding-centre state are one.
    frame = TorusFrame.of(Cell.from_tau(complex(0.2, 1.1), 12), METRIC)
    interaction = Combination(((0.5, Coulomb()), (1.0, PseudopotentialSum({1: 1.0, 3: 0.2}, METRIC))))
    waves = frame.waves(11.0)
    # A liquid whose S - 1 ends well inside both cuts, also times the polynomial of momentum 3.
    structure = 1.0 - np.exp(-0.5 * METRIC.wavevector_norm_sq(waves.vectors)) / 3.0
    direct = torus_energy(frame, 11.0, interaction).of(structure)
    problem = Problem(METRIC, interaction)
    projected = projected_torus_energy(frame, 11.0, problem, Fraction(1, 3), "fermions").of(structure)
    assert direct == pytest.approx(projected, abs=1e-8)
    assert abs(torus_energy(frame, 11.0, Coulomb()).of(structure) - direct) > 0.1


def test_names_and_symmetry():
    assert PseudopotentialSum({3: 0.2, 1: 1.0}).name == "pseudopotentials V_1 = 1, V_3 = 0.2"
    assert PseudopotentialSum({1: 1.0}, METRIC).symmetry == METRIC
    assert "stretch 0.8" in PseudopotentialSum({1: 1.0}, METRIC).name
    assert Problem(ISOTROPIC, PseudopotentialSum({1: 1.0})).is_symmetric
    assert not Problem(ISOTROPIC, PseudopotentialSum({1: 1.0}, METRIC)).is_symmetric
