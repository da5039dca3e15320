"""The finite-torus road: every metric sampled on the lab's cell."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from mcgeo.estimate.finite_size import torus_energy_of_bulk
from mcgeo.estimate.noisy_minimum import fitted_minimum
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.geometry.metric import ISOTROPIC
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.problem import Problem
from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.torus_road import TorusRoad, torus_road
from mcgeo.variational.energy_surface import EnergySurface
from tests.exact.torus_diagonalisation import projected_coulomb_energy
from tests.exact.torus_shapes import cell, stretched
from tests.physics.checks import require_agreement, require_unit_pulls

# Rigid Laughlin 1/3 on the square torus, N = 4, gamma = 1, 1.25, 1.5, 2: exact diagonalisation in second quantisation,
# computed independently of this package.
RIGID = {1.0: -0.4141710479, 1.25: -0.4124468515, 1.5: -0.4084735598, 2.0: -0.3978874107}
MASS_ASPECT = 2.0


def road(folder: Path, variation: str, points: int = 4) -> TorusRoad:
    keys = {
        "state": {"kind": "laughlin", "exponent": 3, "electrons": 4},
        "cell": {"shape": "square"},
        "sampling": {"walkers": 16, "sweeps": 6000, "blocks": 4, "seed": 21, "threads": 1},
        "problem": {"mass": {"ratio": MASS_ASPECT**2}, "variation": variation, "level_mixing": 2.0},
        "scan": {"stretch": {"from": 0.0, "to": math.log(2.0), "points": points}, "road": "torus"},
    }
    return torus_road(config_from_resolved(keys), folder, quiet=True)


def test_projected_energies_are_those_of_the_diagonalisation(tmp_path: Path) -> None:
    """Hole metric of the scan, orbit metric diag(2, 1/2), each point against N = 4 diagonalised on the same cell."""
    found = road(tmp_path, "projected")
    pulls = []
    for point in found.points:
        exact = projected_coulomb_energy(
            cell(1j, 12), 12, 4, stretched(math.exp(point.stretch)), stretched(MASS_ASPECT)
        )
        pulls.append((point.energy.value - exact) / point.energy.error)
    require_unit_pulls(pulls)
    with pytest.raises(AssertionError):
        require_unit_pulls([pull + 0.01 / point.energy.error for pull, point in zip(pulls, found.points, strict=True)])


def test_rigid_energies(tmp_path: Path) -> None:
    """The table's interaction energies plus (gamma/a + a/gamma)/(4 kappa)."""
    found = road(tmp_path, "rigid", points=3)
    for point in found.points:
        gamma = math.exp(point.stretch)
        known = {g: e for g, e in RIGID.items() if abs(g - gamma) < 1e-6}
        if known:
            kinetic = (gamma / MASS_ASPECT + MASS_ASPECT / gamma) / 8.0
            require_agreement(point.energy.value, point.energy.error, next(iter(known.values())) + kinetic)
    assert {round(math.exp(p.stretch), 6) for p in found.points} >= {1.0, 2.0}


def test_same_files_are_not_sampled_again(tmp_path: Path) -> None:
    first = road(tmp_path, "projected", points=4)
    changed = [path.stat().st_mtime_ns for path in sorted(tmp_path.rglob("liquid.h5"))]
    second = road(tmp_path, "two_metric", points=4)
    assert changed == [path.stat().st_mtime_ns for path in sorted(tmp_path.rglob("liquid.h5"))]
    # The orbit that is free does better than the fixed one with its kinetic energy 1/(2 kappa).
    for fixed, free in zip(first.points, second.points, strict=True):
        assert free.energy.value <= fixed.energy.value + 0.25 + 1e-6


def test_finite_size_law_of_an_isotropic_liquid(third: Liquid) -> None:
    """pi b Z(-1/2) + 2 pi s_4 b^3 Z(-3/2) over 2A with b = 2 pi/sqrt(A) and s_4 = 1/8: Epstein zeta functions of the
    unit cell, computed independently of this package by lattice sums."""
    zeta = {"square": (-0.228824310377, 0.0293942816429), "hexagonal": (-0.225255864850, 0.0272532477514)}
    problem = Problem(ISOTROPIC, Coulomb())
    plane = EnergySurface(third.occupations, problem).energy(ISOTROPIC)
    for shape, (first, second) in zeta.items():
        frame = TorusFrame.of(Cell.from_shape(shape, 150))
        b = 2.0 * math.pi / math.sqrt(frame.lab.area)
        law = (math.pi * b * first + 2.0 * math.pi / 8.0 * b**3 * second) / (2.0 * frame.lab.area)
        assert torus_energy_of_bulk(third.occupations, frame, problem) - plane == pytest.approx(law, abs=1e-7)


def test_noisy_minimum_is_calibrated() -> None:
    """Quartic with known minimum, Gaussian noise: pulls of position, value and curvature are standard normal."""
    rng = np.random.default_rng(5)
    x = np.linspace(-0.5, 1.0, 13)
    exact = np.polynomial.Polynomial([0.3, -0.2, 0.4, -0.1, 0.05])
    root = next(r.real for r in exact.deriv().roots() if abs(r.imag) < 1e-12)
    error = np.full(len(x), 2e-3)
    pulls = []
    for _ in range(150):
        found = fitted_minimum(x, exact(x) + error * rng.standard_normal(len(x)), error)
        pulls.append(
            (
                (found.position.value - root) / found.position.error,
                (found.value.value - float(exact(root))) / found.value.error,
                (found.curvature.value - float(exact.deriv(2)(root))) / found.curvature.error,
                (found.gain_at_zero.value - float(exact(0.0) - exact(root))) / found.gain_at_zero.error,
            )
        )
    scatter = np.std(pulls, axis=0)
    assert np.all((scatter > 0.8) & (scatter < 1.3)), scatter
    assert np.all(np.abs(np.mean(pulls, axis=0)) < 0.35)


def test_a_curve_that_falls_to_the_edge_has_no_minimum() -> None:
    x = np.linspace(0.0, 1.0, 8)
    found = fitted_minimum(x, -x, np.full(8, 1e-3))
    assert not found.interior
    assert found.position.value == 1.0
