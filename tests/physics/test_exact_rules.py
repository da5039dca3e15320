"""Rules that every run is checked against: right runs obey them, runs of another state or with lost pairs do not."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from mcgeo.estimate.sum_rules import RULES, pairs_within, sum_rule_z
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.runs.liquid import Liquid
from mcgeo.sampling.measurement import PAIRS
from mcgeo.states.laughlin import Laughlin
from tests.physics.checks import LARGEST_Z, Sampler


@pytest.mark.parametrize("name", ["filled", "bosons", "third", "fifth"])
def test_liquids_obey_them(request: pytest.FixtureRequest, name: str) -> None:
    liquid: Liquid = request.getfixturevalue(name)
    assert set(liquid.bulk_rules) == set(RULES)
    assert all(abs(z) < LARGEST_Z for z in (*liquid.rules.values(), *liquid.bulk_rules.values()))
    assert liquid.diagnostics.verdict == "converged"


@pytest.mark.parametrize(("electrons", "stretch"), [(4, 0.0), (7, 0.8)])
def test_small_and_stretched_cells_obey_them(sampled: Sampler, electrons: int, stretch: float) -> None:
    rules = sampled(3, electrons, shape="square", stretch=stretch, seed=111).rules
    assert abs(rules["pair_count"]) < LARGEST_Z


def test_a_thin_cell_holds_another_liquid(sampled: Sampler) -> None:
    # 3.6 l_B around: pairs are counted right, but the liquid's rules of the plane do not hold. No fault of the run.
    liquid = sampled(3, 10, shape="square", stretch=2.7, seed=112)
    assert abs(liquid.rules["pair_count"]) < LARGEST_Z
    assert max(abs(z) for z in liquid.bulk_rules.values()) > 5.0
    assert liquid.diagnostics.verdict == "converged"


def test_another_state_is_seen(third: Liquid) -> None:
    # The same S(q) taken for that of the next odd exponent's neighbours in filling and shift.
    frame = TorusFrame.of(Cell.from_shape("hexagonal", 111))
    right = Laughlin(3, 37, frame)
    wrong = dataclasses.replace(right, exponent=5)
    assert max(np.abs(list(sum_rule_z(right, third.norm, third.structure_samples).values()))) < LARGEST_Z
    assert max(np.abs(list(sum_rule_z(wrong, third.norm, third.structure_samples).values()))) > 10.0


def test_lost_pairs_are_seen(third: Liquid) -> None:
    counts = third.blocks.counts[PAIRS].copy()
    # One pair in fifty.
    counts -= np.random.default_rng(50).binomial(counts, 0.02)
    spoilt = dataclasses.replace(third, blocks=dataclasses.replace(third.blocks, counts={PAIRS: counts}))
    assert abs(spoilt.rules["pair_count"]) > 10.0
    assert spoilt.diagnostics.verdict == "mixing"
    assert any("pair count" in reason for reason in spoilt.diagnostics.reasons)


def test_pairs_of_independent_electrons() -> None:
    """S(q) = 1 for electrons anywhere in the cell: the disk's share of all pairs."""
    frame = TorusFrame.of(Cell.from_shape("hexagonal", 30))
    norm = np.hypot(*frame.waves(8.0).vectors.T)
    found = pairs_within(frame, norm, np.ones_like(norm), 10, 3.0)
    assert found == pytest.approx(45.0 * np.pi * 9.0 / frame.lab.area, rel=1e-12)


def test_pairs_of_a_lattice() -> None:
    """Two electrons at a fixed distance: the sum over all waves tells inside from outside."""
    cell = Cell.from_shape("square", 20)
    frame, distance = TorusFrame.of(cell), np.array([2.0, 1.0])
    waves = cell.waves(60.0)
    structure = 0.5 * np.abs(1.0 + np.exp(1j * waves.vectors @ distance)) ** 2
    norm = np.hypot(*waves.vectors.T)
    for radius, inside in ((1.5, 0.0), (3.2, 1.0)):
        assert pairs_within(frame, norm, structure, 2, radius) == pytest.approx(inside, abs=0.1)
