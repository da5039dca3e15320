"""Hole conjugates: filling 1 - nu from the liquid of filling nu."""

from __future__ import annotations

import math
from functools import partial
from pathlib import Path

import numpy as np
import pytest

from mcgeo.estimate.conjugate import conjugate_occupations, conjugate_structure
from mcgeo.geometry.metric import ISOTROPIC
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.mass import mass_metric_from_ratio
from mcgeo.problem.problem import Problem
from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.sample import sample
from mcgeo.variational.energy_surface import EnergySurface
from mcgeo.variational.minimum import find_minimum
from tests.exact.torus_diagonalisation import conjugate_state, coulomb, lowest_states, madelung_energy, zero_mode
from tests.exact.torus_shapes import cell
from tests.physics.checks import require_agreement

# Filled lowest level: B. Jancovici, Phys. Rev. Lett. 46, 386 (1981).
FILLED = -math.sqrt(math.pi / 8.0)


@pytest.fixture(scope="module")
def two_thirds(tmp_path_factory: pytest.TempPathFactory) -> Liquid:
    """Four electrons in six orbitals: the conjugate of two holes of Laughlin 1/3."""
    keys = {
        "state": {"kind": "laughlin", "exponent": 3, "electrons": 2, "conjugate": True},
        "cell": {"shape": "square"},
        "sampling": {"walkers": 32, "sweeps": 8000, "blocks": 8, "seed": 7, "threads": 1},
    }
    result = sample(config_from_resolved(keys), tmp_path_factory.mktemp("conjugate"), quiet=True)
    assert isinstance(result, Liquid)
    return result


def exact_energies() -> tuple[float, float]:
    """Conjugate of the two-electron Laughlin state, and the ground state of four electrons, at N_phi = 6."""
    lattice = cell(1j, 6)
    self_energy = madelung_energy(lattice)
    conjugate = conjugate_state(zero_mode(lattice, 6, 2, np.eye(2))[0])
    ground = lowest_states(lattice, 6, 4, coulomb(np.eye(2)))[0]
    return (
        conjugate.energy_per_electron(coulomb(np.eye(2))) + self_energy,
        ground.energy_per_electron(coulomb(np.eye(2))) + self_energy,
    )


def test_sampled_conjugate_against_direct_diagonalisation(two_thirds: Liquid) -> None:
    """N = 4 at 2/3, diagonalised directly; on this cell the conjugate is the ground state."""
    conjugate, ground = exact_energies()
    assert conjugate == pytest.approx(ground, abs=1e-9)
    energy = two_thirds.torus_energy(Coulomb())
    assert two_thirds.n_electrons == 4
    require_agreement(energy.value, energy.error, ground)
    with pytest.raises(AssertionError):
        # Without the filled level's part the energy is visibly another one.
        sampled = two_thirds._sampled_structure
        wrong = 1.0 + 0.5 * (sampled - 1.0)
        assert np.allclose(wrong, conjugate_structure(two_thirds.states[0].filling, two_thirds.norm, sampled))


def test_energy_relation_per_flux(third: Liquid) -> None:
    """(1 - nu) E(1 - nu) = nu E(nu) + (1 - 2 nu) E(1): S. M. Girvin, Phys. Rev. B 29, 6012 (1984)."""
    problem = Problem(ISOTROPIC, Coulomb())
    found = third.occupations
    conjugate = conjugate_occupations(found)
    nu = float(found.filling)
    one = EnergySurface(found, problem).sample_energies(ISOTROPIC)
    other = EnergySurface(conjugate, problem).sample_energies(ISOTROPIC)
    assert conjugate.filling == 1 - found.filling
    assert np.allclose((1.0 - nu) * other, nu * one + (1.0 - 2.0 * nu) * FILLED, atol=1e-9)


def test_conjugating_twice_is_the_identity(third: Liquid) -> None:
    found = third.occupations
    twice = conjugate_occupations(conjugate_occupations(found))
    assert np.allclose(twice.samples, found.samples, rtol=1e-12)
    samples = third.structure_samples[:5]
    filling = found.filling
    back = conjugate_structure(1 - filling, third.norm, conjugate_structure(filling, third.norm, samples))
    assert np.allclose(back, samples, atol=1e-12)


def test_structure_and_occupations_of_the_conjugate_belong_together(third: Liquid) -> None:
    """S from the transformed occupations equals the transformed S of the fit."""
    found, conjugate = third.occupations, conjugate_occupations(third.occupations)
    q = np.linspace(0.2, 5.0, 25)
    gaussian = np.exp(-0.5 * q**2)
    fitted = 1.0 + gaussian * (found.guiding_centre_structure(q) - 1.0)
    direct = 1.0 + gaussian * (conjugate.guiding_centre_structure(q) - 1.0)
    assert np.allclose(conjugate_structure(found.filling, q, fitted), direct, atol=1e-12)


def test_same_optimum_in_a_projected_problem(third: Liquid) -> None:
    problem = Problem(mass_metric_from_ratio(4.0, 0.3), Coulomb())
    liquids = (third.occupations, conjugate_occupations(third.occupations))
    first, second = map(find_minimum, map(partial(EnergySurface, problem=problem), liquids))
    assert second.metric.distance(first.metric) < 1e-7
    assert second.stretch.error == pytest.approx(first.stretch.error, rel=1e-6)
    # The gain per flux quantum is common: nu gain(nu) = (1 - nu) gain(1 - nu).
    assert 2.0 * second.gain_mass.value == pytest.approx(first.gain_mass.value, rel=1e-6)


def test_a_conjugate_needs_fermions_below_filling_one(tmp_path: Path) -> None:
    from mcgeo.errors import ConfigError

    with pytest.raises(ConfigError, match="conjugate"):
        config_from_resolved({"state": {"kind": "laughlin", "exponent": 2, "electrons": 4, "conjugate": True}})
