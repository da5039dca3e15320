"""Structure factors and particle-hole conjugates of the exact diagonalisation.

Table: exact diagonalisation in second quantisation computed independently of this package.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from numpy.typing import NDArray

from tests.exact.torus_diagonalisation import (
    TorusState,
    conjugate_state,
    coulomb,
    lowest_states,
    metric_norm_sq,
    pseudopotential,
    zero_mode,
)
from tests.exact.torus_shapes import ISOTROPIC, cell, nonzero_residues, stretched, waves


@pytest.mark.parametrize(
    ("n_electrons", "gamma", "expected"),
    [
        (3, 1.0, [0.42584059, 0.42584059, 0.84196997, 1.07620693, 1.07620693]),
        (4, 1.0, [0.28877020, 0.28877020, 0.61706202, 1.09433325, 1.09433325]),
        (6, 1.0, [0.18952626, 0.18952626, 0.40353128, 0.81894272, 0.81894272]),
        (4, 2.0, [0.14349102, 0.63399708, 0.79331478, 0.60254007, 1.06426258]),
        (6, 2.0, [0.09145776, 0.40262061, 0.51432384, 0.41963954, 1.11600798]),
    ],
)
def test_structure_factor_of_the_laughlin_state(
    n_electrons: int, gamma: float, expected: list[float]
) -> None:
    n_flux = 3 * n_electrons
    lattice, metric = cell(1j, n_flux), stretched(gamma)
    q = waves(lattice, [(1, 0), (0, 1), (1, 1), (2, 0), (0, 2)])
    guiding = zero_mode(lattice, n_flux, n_electrons, metric)[0].structure_factor(q)
    orbit = np.exp(-metric_norm_sq(metric, q[:, 0], q[:, 1]) / 2.0)
    assert 1.0 + orbit * (guiding - 1.0) == pytest.approx(np.array(expected), abs=1e-8)


@pytest.mark.parametrize(("n_flux", "n_particles", "bosons"), [(12, 4, False), (6, 4, False), (8, 4, True)])
def test_structure_factor_sum_rule(n_flux: int, n_particles: int, bosons: bool) -> None:
    lattice = cell(complex(0.3, 0.9), n_flux)
    state = lowest_states(lattice, n_flux, n_particles, coulomb(stretched(1.6, 0.3)), bosons=bosons)[0]
    q = waves(lattice, nonzero_residues(n_flux))
    mean = np.mean(state.structure_factor(q) - 1.0)
    sign = 1 if bosons else -1
    assert mean == pytest.approx(sign * (n_particles - 1) / (n_flux + sign), abs=1e-12)
    assert np.all(state.structure_factor(q) > -1e-12)
    assert state.structure_factor(waves(lattice, [(n_flux, 0)])) == pytest.approx([n_particles])


def test_structure_factor_gives_the_eigenvalue_of_any_interaction() -> None:
    lattice = cell(complex(0.3, 0.9), 12)

    def gaussian(qx: NDArray[np.float64], qy: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.exp(-0.7 * qx**2 - 0.4 * qx * qy - 0.5 * qy**2)

    for interaction in (gaussian, coulomb(stretched(1.5, 0.3), 1)):
        for state in lowest_states(lattice, 12, 4, interaction, n_states=3, momentum=1):
            assert state.energy_per_electron(interaction) == pytest.approx(state.energy / 4, abs=1e-13)


def pair_structure_factor(state: TorusState, m1: int, m2: int) -> float:
    """Sbar(q) of two fermions from explicit matrices of exp(iq.R) on their product space."""
    n_flux = state.sector.n_flux
    raise_orbital = np.roll(np.eye(n_flux), 1, axis=0)
    clock = np.diag(np.exp(2j * math.pi * np.arange(n_flux) / n_flux))
    wave = np.exp(1j * math.pi * m1 * m2 / n_flux) * (
        np.linalg.matrix_power(raise_orbital, m1) @ np.linalg.matrix_power(clock, m2)
    )
    amplitudes = np.zeros((n_flux, n_flux), dtype=complex)
    for (a, b), amplitude in zip(state.sector.orbitals, state.vector, strict=True):
        amplitudes[a, b], amplitudes[b, a] = amplitude / math.sqrt(2.0), -amplitude / math.sqrt(2.0)
    density = np.kron(wave, np.eye(n_flux)) + np.kron(np.eye(n_flux), wave)
    return float(np.linalg.norm(density.conj().T @ amplitudes.ravel()) ** 2 / 2.0)


def test_structure_factor_of_two_electrons_from_explicit_operators() -> None:
    lattice = cell(complex(0.3, 0.9), 5)
    state = lowest_states(lattice, 5, 2, coulomb(stretched(1.5, 0.3)))[0]
    integers = nonzero_residues(5)
    explicit = [pair_structure_factor(state, m1, m2) for m1, m2 in integers]
    assert state.structure_factor(waves(lattice, integers)) == pytest.approx(np.array(explicit), abs=1e-12)


@pytest.mark.parametrize(("n_flux", "n_holes"), [(6, 2), (9, 3)])
def test_conjugate_at_two_thirds(n_flux: int, n_holes: int) -> None:
    lattice, metric = cell(complex(0.3, 0.9), n_flux), stretched(1.8, 0.4)
    holes = zero_mode(lattice, n_flux, n_holes, metric)[0]
    electrons = conjugate_state(holes)
    q = waves(lattice, nonzero_residues(n_flux))
    assert 2.0 * electrons.structure_factor(q) == pytest.approx(holes.structure_factor(q), abs=1e-12)

    # The interactions of electrons and of holes differ by a constant, so the conjugate must be the electrons'
    # ground state.
    n_electrons = n_flux - n_holes
    ground, excited = lowest_states(lattice, n_flux, n_electrons, pseudopotential(metric, 1), n_states=2)
    assert ground.sector.momentum == electrons.sector.momentum
    assert abs(np.vdot(ground.vector, electrons.vector)) == pytest.approx(1.0, abs=1e-12)
    assert abs(np.vdot(excited.vector, electrons.vector)) < 1e-9
    wrong = zero_mode(lattice, n_flux, n_holes, ISOTROPIC)[0]
    assert abs(np.vdot(ground.vector, conjugate_state(wrong).vector)) < 1.0 - 1e-4
