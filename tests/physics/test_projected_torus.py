"""Small tori whose orbit and hole have different shapes, against exact diagonalisation."""

from __future__ import annotations

import math
from fractions import Fraction
from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray

from mcgeo.estimate.statistics import mean_estimate
from mcgeo.estimate.torus_energy import LinearEnergy, projected_torus_energy
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.problem import Problem
from mcgeo.runs.liquid import Liquid
from mcgeo.states.base import BOSONS, FERMIONS
from tests.exact.torus_diagonalisation import (
    TorusState,
    coulomb,
    madelung_energy,
    projected_coulomb_energy,
    zero_mode,
)
from tests.exact.torus_shapes import TAU, cell, stretched
from tests.physics.checks import Sampler, require_agreement, require_unit_pulls

Shape = tuple[float, float]

# Cell, N, then (stretch, angle) of the hole and of the orbit.
CASES = [
    ("square", 4, (0.0, 0.0), (0.5, 0.3)),
    ("square", 4, (0.6, 0.4), (0.0, 0.0)),
    ("hexagonal", 5, (0.0, 0.0), (math.log(2.0), 0.0)),
    ("square", 6, (0.2, -0.3), (0.5, 0.3)),
    ("hexagonal", 6, (0.4, 1.2), (0.8, -1.5)),
]
Q_MAX = 8.0


def matrix(shape: Shape) -> NDArray[np.float64]:
    return stretched(math.exp(shape[0]), shape[1])


@cache
def exact_state(cell_shape: str, electrons: int, hole: Shape) -> TorusState:
    n_flux = 3 * electrons
    return zero_mode(cell(TAU[cell_shape], n_flux), n_flux, electrons, matrix(hole))[0]


def exact_energy(cell_shape: str, electrons: int, hole: Shape, orbit: Shape, level: int) -> float:
    lattice = cell(TAU[cell_shape], 3 * electrons)
    state = exact_state(cell_shape, electrons, hole)
    return state.energy_per_electron(coulomb(matrix(orbit), level)) + madelung_energy(lattice)


def estimator(frame: TorusFrame, orbit: Shape, level: int, statistics: str = FERMIONS) -> LinearEnergy:
    problem = Problem(UnimodularMetric(*orbit), Coulomb(), level)
    return projected_torus_energy(frame, Q_MAX, problem, Fraction(1, 3), statistics)


@pytest.mark.parametrize(("level", "tolerance"), [(0, 1e-4), (1, 1.5e-3)])
@pytest.mark.parametrize(("cell_shape", "electrons", "hole", "orbit"), CASES)
def test_estimator_on_the_exact_structure_factor(
    cell_shape: str, electrons: int, hole: Shape, orbit: Shape, level: int, tolerance: float
) -> None:
    # What is left is the cut at |q|_g = 4, where Sbar of so few electrons is not yet at its limit.
    frame = TorusFrame.of(Cell.from_shape(cell_shape, 3 * electrons), UnimodularMetric(*hole))
    vectors = frame.waves(Q_MAX).vectors
    dressing = np.exp(-0.5 * frame.metric.wavevector_norm_sq(vectors))
    state = exact_state(cell_shape, electrons, hole)
    structure = 1.0 + dressing * (state.structure_factor(vectors) - 1.0)
    expected = exact_energy(cell_shape, electrons, hole, orbit, level)
    assert estimator(frame, orbit, level).of(structure) == pytest.approx(expected, abs=tolerance)
    # Orbits of the hole's own shape are another problem, and electrons are no bosons.
    own_orbit = exact_energy(cell_shape, electrons, hole, hole, level)
    assert abs(own_orbit - expected) > tolerance
    assert abs(estimator(frame, orbit, level, BOSONS).of(structure) - expected) > tolerance


def sampled_case(sampled: Sampler, cell_shape: str, electrons: int, hole: Shape) -> Liquid:
    stretch, angle = hole
    angle_degrees = math.degrees(angle)
    return sampled(
        3, electrons, shape=cell_shape, stretch=stretch, angle_degrees=angle_degrees, sweeps=4000, seed=61
    )


@pytest.mark.parametrize(("cell_shape", "electrons", "hole", "orbit"), CASES)
def test_sampled_liquid_in_another_orbit(
    sampled: Sampler, cell_shape: str, electrons: int, hole: Shape, orbit: Shape
) -> None:
    liquid = sampled_case(sampled, cell_shape, electrons, hole)
    for level in (0, 1):
        energies = estimator(liquid.frame, orbit, level).of(liquid.structure_samples)
        found = mean_estimate(energies)
        exact = exact_energy(cell_shape, electrons, hole, orbit, level)
        require_agreement(found.value, found.error, exact)


def test_sampled_liquids_together(sampled: Sampler) -> None:
    # Waves beyond |q|_g = 3 carry most of the noise; with the exact S(q) there, level 0 becomes a sharp test.
    pulls = []
    for cell_shape, electrons, hole, orbit in CASES:
        liquid = sampled_case(sampled, cell_shape, electrons, hole)
        energy = estimator(liquid.frame, orbit, 0)
        vectors = liquid.frame.waves(Q_MAX).vectors
        state = exact_state(cell_shape, electrons, hole)
        dressing = np.exp(-0.5 * liquid.norm**2)
        exact_structure = 1.0 + dressing * (state.structure_factor(vectors) - 1.0)
        far = liquid.norm > 3.0
        structure = np.where(far, exact_structure, liquid.structure_samples)
        found = mean_estimate(energy.of(structure))
        assert found.error < 1e-3
        pulls.append((found.value - float(energy.of(exact_structure))) / found.error)
    require_unit_pulls(pulls)


def test_oracle_agrees_with_itself() -> None:
    # The two ways to put the question to the diagonalisation used above.
    lattice, hole, orbit = cell(TAU["square"], 12), (0.6, 0.4), (0.3, -1.0)
    energy = projected_coulomb_energy(lattice, 12, 4, matrix(hole), matrix(orbit), 1)
    assert exact_energy("square", 4, hole, orbit, 1) == pytest.approx(energy, abs=1e-12)
