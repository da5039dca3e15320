"""Control variates: means exactly zero, less noise, and energies that stay right.

Exact energy: Laughlin 1/3, eight electrons on the hexagonal torus, by diagonalisation in second quantisation computed
independently of this package (zero mode of Haldane's pseudopotential, Phys. Rev. Lett. 51, 605 (1983)).
"""

from __future__ import annotations

import dataclasses
import math
import threading
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

from mcgeo.estimate.statistics import mean_estimate
from mcgeo.estimate.torus_energy import torus_energy
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.geometry.metric import ISOTROPIC
from mcgeo.kernels.stein import edge_bias
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.problem import Problem
from mcgeo.report.text import sample_text
from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.sample import sample
from mcgeo.runs.sample_summary import sample_summary
from mcgeo.sampling.measurement import CONTROLS, STRUCTURE, torus_measurement
from mcgeo.sampling.walkers import groups_of, start_walkers
from mcgeo.states.base import WalkerGroup
from mcgeo.states.laughlin import Laughlin
from mcgeo.variational.energy_surface import EnergySurface
from tests.physics.checks import mean_probability, require_unit_pulls

Array = NDArray[np.float64]
Run = Callable[..., Liquid]

OBLIQUE, LONG = {"tau": [-0.4, 1.1]}, {"tau": [0.2, 2.5]}
HEXAGONAL, SQUARE = {"shape": "hexagonal"}, {"shape": "square"}
STRETCHED = {"stretch": 0.7, "angle_degrees": 25.0}
EXACT_OF_EIGHT = -0.4109575768


def laughlin(exponent: int, electrons: int, **keys: Any) -> dict[str, Any]:
    return {"kind": "laughlin", "exponent": exponent, "electrons": electrons, **keys}


def moore_read(filling: str, electrons: int, **keys: Any) -> dict[str, Any]:
    return {"kind": "moore_read", "filling": filling, "electrons": electrons, **keys}


def fermi_sea(filling: str, electrons: int) -> dict[str, Any]:
    return {"kind": "fermi_sea", "filling": filling, "electrons": electrons}


@pytest.fixture(scope="module")
def run(tmp_path_factory: pytest.TempPathFactory) -> Run:
    def liquid(state: dict[str, Any], cell: dict[str, Any] = HEXAGONAL, **sampling: Any) -> Liquid:
        keys = {"walkers": 32, "sweeps": 800, "blocks": 8, "equilibration": 200, "seed": 61, "threads": 1, **sampling}
        config = config_from_resolved({"state": state, "cell": cell, "sampling": keys})
        folder: Path = tmp_path_factory.mktemp("controls")
        found = sample(config, folder, quiet=True)
        assert isinstance(found, Liquid)
        return found

    return liquid


@pytest.mark.parametrize(
    ("state", "cell", "sweeps"),
    [
        (laughlin(2, 24), HEXAGONAL, 1600),
        (laughlin(3, 8), SQUARE, 4000),
        (laughlin(3, 30), OBLIQUE, 1600),
        (laughlin(3, 30, metric=STRETCHED), SQUARE, 1600),
        (laughlin(3, 40), LONG, 1200),
        (laughlin(5, 20, metric=STRETCHED), OBLIQUE, 2400),
        (moore_read("1/2", 20, sector="all"), HEXAGONAL, 480),
        (moore_read("1/2", 12, sector=1), OBLIQUE, 960),
        (moore_read("1", 16, sector=3, metric=STRETCHED), SQUARE, 640),
        (fermi_sea("1/2", 13), HEXAGONAL, 640),
        (fermi_sea("1/4", 9), SQUARE, 960),
    ],
)
def test_means_are_zero(run: Run, state: dict[str, Any], cell: dict[str, Any], sweeps: int) -> None:
    liquid = run(state, cell, sweeps=sweeps)
    assert liquid.control_variates is not None
    assert np.all(np.abs(liquid.control_variates.z) < 4.0)
    # Blocks of 60 sweeps and more: neighbours hardly share anything.
    blocks = liquid.blocks.means[CONTROLS]
    samples = blocks.reshape(-1, blocks.shape[-1])
    assert mean_probability(samples, np.zeros(samples.shape[1])) > 1e-4


def controls(width_over_area: float, forces_of: int = 3) -> tuple[Array, float]:
    """Walker means of the widest control of 20 electrons at 1/3, over 4000 configurations, and its edge bias."""
    frame = TorusFrame.of(Cell.from_shape("square", 60))
    state, other = Laughlin(3, 20, frame), Laughlin(forces_of, 20, frame)
    cell, waves = frame.isotropic, frame.waves(1.0)
    measurement = torus_measurement(state, waves, np.zeros(len(waves.vectors)))
    width_sq = width_over_area * cell.area
    stein = measurement.stein._replace(width_sq=width_sq, n_controls=1)
    measurement = dataclasses.replace(measurement, stein=stein)

    def with_forces(group: WalkerGroup) -> WalkerGroup:
        # Forces of another exponent on the same positions.
        def forces() -> Array | None:
            return other.group(group.a.copy(), group.b.copy(), group.words.copy()).forces()

        if forces_of != 3:
            group.forces = forces  # type: ignore[method-assign]
        return group

    means = []
    for group in groups_of(state, start_walkers(state, 32, seed=7)):
        group.advance(5.0, 200)
        record = measurement.block(with_forces(group), 5.0, 1000, 6, threading.Event())
        means.append(record.means[CONTROLS])
    return np.concatenate(means)[:, 0], edge_bias(cell.tau, cell.side, 20, width_sq)


def z_of(samples: Array) -> float:
    return float(samples.mean() / samples.std(ddof=1) * math.sqrt(len(samples)))


def test_a_gaussian_too_wide_for_the_cell_has_the_mean_of_its_edges() -> None:
    fits, bias = controls(1.0 / 160.0)
    assert bias < 1e-5 and abs(z_of(fits)) < 4.0
    wide, bias = controls(1.0 / 40.0)
    assert z_of(wide) < -20.0
    # Predicted in standard deviations of single configurations; 32000 nearly independent ones gave these walkers.
    deviation = wide.std(ddof=1) * math.sqrt(1000.0)
    assert -wide.mean() / deviation == pytest.approx(bias, rel=0.35)


def test_forces_of_another_state_are_seen() -> None:
    samples, _ = controls(1.0 / 160.0, forces_of=2)
    assert abs(z_of(samples)) > 20.0


@pytest.mark.parametrize(
    ("state", "sweeps"),
    [(laughlin(3, 50), 1600), (moore_read("1/2", 50, sector=1), 240), (fermi_sea("1/2", 19), 320)],
)
def test_variance_of_the_energy_falls_fivefold(run: Run, state: dict[str, Any], sweeps: int) -> None:
    liquid = run(state, sweeps=sweeps, blocks=16)
    energy = torus_energy(liquid.frame, liquid.q_max, Coulomb())
    assert liquid.control_variates is not None and liquid.control_variates.verdict == "used"
    ratio = energy.of(liquid.blocks.means[STRUCTURE]).var() / energy.of(liquid.control_variates.blocks).var()
    assert ratio > 5.0
    assert liquid.variance_reduction == pytest.approx(ratio)
    # Through the pair occupations the energy of the plane gains too.
    assert plane_error(without_controls(liquid)) > 1.6 * plane_error(liquid)


def plane_error(liquid: Liquid) -> float:
    surface = EnergySurface(liquid.occupations, Problem(ISOTROPIC, Coulomb()))
    return mean_estimate(surface.sample_energies(ISOTROPIC)).error


def without_controls(liquid: Liquid) -> Liquid:
    blocks = dataclasses.replace(liquid.blocks, means={STRUCTURE: liquid.blocks.means[STRUCTURE]})
    return dataclasses.replace(liquid, blocks=blocks)


def test_energies_of_many_runs_scatter_as_their_errors_say(run: Run) -> None:
    energies, plain = [], []
    for seed in range(100):
        liquid = run(laughlin(3, 8), sweeps=200, blocks=8, seed=1000 + seed)
        energies.append(liquid.torus_energy(Coulomb()))
        plain.append(without_controls(liquid).torus_energy(Coulomb()))
    require_unit_pulls([(energy.value - EXACT_OF_EIGHT) / energy.error for energy in energies])
    assert np.mean([e.error for e in energies]) < 0.8 * np.mean([e.error for e in plain])


def test_controls_off_zero_are_not_used_and_the_run_says_so(run: Run) -> None:
    liquid = run(laughlin(3, 20))
    assert "variance of the energy" in sample_text(sample_summary(liquid))
    means = {**liquid.blocks.means, CONTROLS: liquid.blocks.means[CONTROLS] + 1.0}
    spoilt = dataclasses.replace(liquid, blocks=dataclasses.replace(liquid.blocks, means=means))
    summary = sample_summary(spoilt)
    assert summary["diagnostics"]["controls"] == "not_zero"
    assert max(summary["diagnostics"]["control_z"]) > 5.0
    assert summary["diagnostics"]["variance_reduction"] == pytest.approx(1.0)
    assert "not used" in sample_text(summary)
    np.testing.assert_array_equal(spoilt.structure_samples, without_controls(liquid).structure_samples)
    assert "controls" not in sample_summary(without_controls(liquid))["diagnostics"]
