"""Energies of the exact diagonalisation against numbers and closed forms found without it.

Tables: exact diagonalisation in second quantisation computed independently of this package. Coulomb ground
state at N = 4: Yoshioka, Halperin, Lee, Phys. Rev. Lett. 50, 1219 (1983).
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from numpy.typing import NDArray

from tests.exact.momentum_sector import momentum_sector
from tests.exact.torus_diagonalisation import (
    conjugate_state,
    coulomb,
    lowest_states,
    madelung_energy,
    projected_coulomb_energy,
    pseudopotential,
    zero_mode,
)
from tests.exact.torus_shapes import ISOTROPIC, TAU, cell, rotation, stretched


def coulomb_ground_state_energy(lattice: NDArray[np.float64], n_electrons: int) -> float:
    ground = lowest_states(lattice, 3 * n_electrons, n_electrons, coulomb(ISOTROPIC))[0]
    return ground.energy / n_electrons + madelung_energy(lattice)


LAUGHLIN_AND_EXACT = [
    ("square", 2, -0.4191977232, -0.4191977232),
    ("square", 3, -0.4120745943, -0.4121628664),
    ("square", 4, -0.4141710479, -0.4151913687),
    ("square", 5, -0.4123992273, -0.4126436203),
    ("square", 6, -0.4115825593, -0.4118981368),
    ("hexagonal", 2, -0.4152234594, -0.4152234594),
    ("hexagonal", 3, -0.4138978347, -0.4141554878),
    ("hexagonal", 4, -0.4142226439, -0.4149908812),
    ("hexagonal", 5, -0.4120638905, -0.4121625285),
    ("hexagonal", 6, -0.4113987749, -0.4115963789),
]


@pytest.mark.parametrize(("shape", "n_electrons", "laughlin", "exact"), LAUGHLIN_AND_EXACT)
def test_coulomb_energies_at_one_third(shape: str, n_electrons: int, laughlin: float, exact: float) -> None:
    n_flux = 3 * n_electrons
    lattice = cell(TAU[shape], n_flux)
    energy = projected_coulomb_energy(lattice, n_flux, n_electrons, ISOTROPIC, ISOTROPIC)
    assert energy == pytest.approx(laughlin, abs=1e-10)
    assert coulomb_ground_state_energy(lattice, n_electrons) == pytest.approx(exact, abs=1e-10)


@pytest.mark.parametrize(("n_electrons", "energy"), [(4, -0.415191), (5, -0.412670), (6, -0.412925)])
def test_coulomb_ground_state_in_rectangles(n_electrons: int, energy: float) -> None:
    # Sides in the ratio N/4, as Yoshioka, Halperin and Lee took them; they give -0.4152 at N = 4.
    lattice = cell(1j * n_electrons / 4.0, 3 * n_electrons)
    assert coulomb_ground_state_energy(lattice, n_electrons) == pytest.approx(energy, abs=1e-6)


@pytest.mark.parametrize(
    ("n_electrons", "gamma", "energy"),
    [
        (3, 1.5, -0.4073927894),
        (3, 2.0, -0.4008342666),
        (3, 4.0, -0.3977173954),
        (4, 1.5, -0.4084735598),
        (4, 2.0, -0.3978874107),
        (4, 4.0, -0.3773538335),
        (6, 2.0, -0.4005633044),
    ],
)
def test_stretched_laughlin_state_on_the_square(n_electrons: int, gamma: float, energy: float) -> None:
    n_flux = 3 * n_electrons
    metric = stretched(gamma)
    found = projected_coulomb_energy(cell(1j, n_flux), n_flux, n_electrons, metric, metric)
    assert found == pytest.approx(energy, abs=1e-10)


@pytest.mark.parametrize(("gamma", "energy"), [(0.5, -0.3997977359), (2.0, -0.4030650004)])
def test_hexagonal_torus_tells_a_metric_from_its_inverse(gamma: float, energy: float) -> None:
    metric = stretched(gamma)
    found = projected_coulomb_energy(cell(TAU["hexagonal"], 12), 12, 4, metric, metric)
    assert found == pytest.approx(energy, abs=1e-10)


@pytest.mark.parametrize(
    ("n_particles", "shape", "gamma", "energy"),
    [
        (3, "square", 1.0, -0.4925719299),
        (3, "hexagonal", 1.0, -0.4931109009),
        (3, "square", 1.5, -0.4884045477),
        (3, "square", 4.0, -0.4822027332),
        (4, "square", 1.0, -0.4910551304),
        (4, "hexagonal", 1.0, -0.4911460384),
        (4, "square", 2.0, -0.4759097096),
        (4, "square", 4.0, -0.4572304908),
    ],
)
def test_bosons_at_one_half(n_particles: int, shape: str, gamma: float, energy: float) -> None:
    n_flux = 2 * n_particles
    lattice, metric = cell(TAU[shape], n_flux), stretched(gamma)
    found = projected_coulomb_energy(lattice, n_flux, n_particles, metric, metric, bosons=True)
    assert found == pytest.approx(energy, abs=1e-10)


@pytest.mark.parametrize(
    ("n_flux", "n_particles", "bosons"),
    [(9, 3, False), (12, 4, False), (10, 2, False), (8, 4, True), (8, 2, True)],
)
def test_zero_mode_is_exact_and_alone(n_flux: int, n_particles: int, bosons: bool) -> None:
    lattice = cell(complex(0.3, 0.9), n_flux)
    ground, excited = zero_mode(lattice, n_flux, n_particles, stretched(2.0, 0.4), bosons=bosons, n_states=2)
    assert abs(ground.energy) < 1e-12
    assert excited.energy > 1e-3


def test_no_zero_mode_away_from_its_momentum_and_filling() -> None:
    for n_flux, momentum in [(12, 0), (11, 0)]:
        lattice = cell(1j, n_flux)
        hamiltonian = pseudopotential(ISOTROPIC, 1)
        ground = lowest_states(lattice, n_flux, 4, hamiltonian, momentum=momentum, background=False)[0]
        assert ground.energy > 1e-3


def test_wrong_hole_metric_is_seen_in_the_energy() -> None:
    lattice = cell(1j, 12)
    right = projected_coulomb_energy(lattice, 12, 4, stretched(2.0), stretched(2.0))
    for wrong in (ISOTROPIC, stretched(0.5), stretched(2.0, 0.3)):
        assert abs(projected_coulomb_energy(lattice, 12, 4, wrong, stretched(2.0)) - right) > 1e-3


@pytest.mark.parametrize("level", [0, 1])
def test_cell_basis_and_orientation_do_not_matter(level: int) -> None:
    lattice, hole, orbit = cell(complex(0.2, 1.1), 9), stretched(1.7, 0.5), stretched(1.3, -0.2)
    reference = projected_coulomb_energy(lattice, 9, 3, hole, orbit, level)
    turn = rotation(0.7)
    turned = projected_coulomb_energy(
        lattice @ turn.T, 9, 3, turn @ hole @ turn.T, turn @ orbit @ turn.T, level
    )
    sheared = projected_coulomb_energy(np.array([[1, 1], [0, 1]]) @ lattice, 9, 3, hole, orbit, level)
    swapped = projected_coulomb_energy(lattice[::-1], 9, 3, hole, orbit, level)
    assert [turned, sheared, swapped] == pytest.approx([reference] * 3, abs=1e-11)


def filled_level_energy(orbit: NDArray[np.float64], level: int) -> float:
    """Energy of the filled level without its finite-size terms N^(-3/2), N^(-5/2), N^(-7/2)."""
    sizes = np.array([9, 11, 13, 15])
    energies = [projected_coulomb_energy(cell(1j, n), n, n, ISOTROPIC, orbit, level) for n in sizes.tolist()]
    return float(np.linalg.solve(sizes[:, None] ** np.array([0.0, -1.5, -2.5, -3.5]), energies)[0])


@pytest.mark.parametrize(("level", "factor"), [(0, 1.0), (1, 0.75)])
@pytest.mark.parametrize("gamma", [1.0, 1.3])
def test_filled_level_has_its_closed_form(gamma: float, level: int, factor: float) -> None:
    # -sqrt(pi/8) in level 0 (Jancovici, Phys. Rev. Lett. 46, 386 (1981)), 3/4 of it in level 1 as the mean
    # of L_1(q^2/2)^2 over exp(-q^2/2) dq is 3/4. An orbit metric averages 1/|q| over angles, which gives
    # 1/AGM(gamma^1/2, gamma^-1/2).
    a, b = math.sqrt(gamma), 1.0 / math.sqrt(gamma)
    for _ in range(6):
        a, b = (a + b) / 2.0, math.sqrt(a * b)
    expected = -math.sqrt(math.pi / 8.0) * factor / a
    assert filled_level_energy(stretched(gamma), level) == pytest.approx(expected, abs=2e-5)


@pytest.mark.parametrize(
    ("tau", "half_constant"),
    [
        (1j, -1.95013246000097794),
        (TAU["hexagonal"], -1.96051578931989165),
        (2j, -1.78283754335690133),
        (4j, -1.13502844187152989),
    ],
)
def test_self_energy_of_the_cell(tau: complex, half_constant: float) -> None:
    # Square and hexagonal: Bonsall, Maradudin, Phys. Rev. B 15, 1959 (1977); rectangles: independent sums.
    lattice = cell(tau, 7)
    assert madelung_energy(lattice) * math.sqrt(2.0 * math.pi * 7) == pytest.approx(half_constant, abs=1e-12)


def test_bad_questions_are_refused() -> None:
    lattice = cell(1j, 9)
    with pytest.raises(ValueError, match="area"):
        zero_mode(cell(1j, 10), 9, 3, ISOTROPIC)
    with pytest.raises(ValueError, match="no Laughlin state of 3 bosons"):
        zero_mode(lattice, 9, 3, ISOTROPIC, bosons=True)
    with pytest.raises(ValueError, match="multiples of 2 pi"):
        zero_mode(lattice, 9, 3, ISOTROPIC)[0].structure_factor([[0.1, 0.2]])
    with pytest.raises(ValueError, match="fall off"):
        lowest_states(lattice, 9, 3, lambda qx, qy: 2.0 * math.pi / np.hypot(qx, qy))
    with pytest.raises(ValueError, match="no state of 2 particles in 2 orbitals"):
        momentum_sector(2, 2, 0)
    with pytest.raises(ValueError, match="only fermions"):
        conjugate_state(zero_mode(cell(1j, 4), 4, 2, ISOTROPIC, bosons=True)[0])
