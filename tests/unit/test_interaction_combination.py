"""Sums of interactions are sums in everything."""

import numpy as np
import pytest

from mcgeo.geometry.cell import Cell
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.combination import Combination
from mcgeo.problem.coulomb import Coulomb
from mcgeo.problem.finite_width import Softened
from mcgeo.problem.gaussian import Gaussian
from mcgeo.problem.problem import Problem
from mcgeo.problem.pseudopotential_sum import PseudopotentialSum
from mcgeo.problem.screened import OneGate

WAVES = np.array([[[0.3, 0.1], [-1.0, 2.0]], [[0.0, 3.0], [5.0, 0.2]]])
METRIC = UnimodularMetric(0.6, 0.2)


def test_a_gate_is_a_difference():
    # The image of a gate at d is a charge of the opposite sign at 2 d.
    gate, made = OneGate(1.5), Combination(((1.0, Coulomb()), (-1.0, Softened(3.0))))
    np.testing.assert_allclose(made.potential(WAVES), gate.potential(WAVES), rtol=1e-12)
    for tau in (1j, complex(0.4, 2.0)):
        cell = Cell.from_tau(tau, 7)
        assert made.self_energy(cell) == pytest.approx(gate.self_energy(cell), abs=1e-12)
    assert made.symmetry == ISOTROPIC


def test_every_term_acts_in_its_own_way():
    pseudo = PseudopotentialSum({1: 1.0}, METRIC)
    made = Combination(((0.5, Coulomb(METRIC)), (2.0, pseudo), (-1.0, Gaussian(1.0))))
    for level in (0, 1):
        single = [Problem(METRIC, term, level).effective_potential(WAVES) for _, term in made.terms]
        found = Problem(METRIC, made, level).effective_potential(WAVES)
        np.testing.assert_allclose(found, 0.5 * single[0] + 2.0 * single[1] - single[2], rtol=1e-13)
    cell = Cell.from_tau(1j, 5)
    energies = [weight * term.self_energy(cell) for weight, term in made.terms]
    assert made.self_energy(cell) == pytest.approx(sum(energies), abs=1e-14)
    assert made.symmetry is None
    assert set(made.metrics) == {METRIC, ISOTROPIC}
    assert made.guiding_centre_reach(ISOTROPIC, 9.0) == pseudo.guiding_centre_reach(ISOTROPIC, 9.0) > 9.0
    assert Combination(((1.0, Coulomb(METRIC)), (2.0, pseudo))).symmetry == METRIC


def test_the_name_lists_the_terms():
    assert Combination(((0.5, Coulomb()), (-2.0, Gaussian(1.5)))).name == (
        "0.5 x (Coulomb) + -2 x (Gaussian of range 1.5 l_B)"
    )
