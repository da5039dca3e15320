"""A sweep divided among jobs of an array: the bits of the undivided one."""

from __future__ import annotations

import json
import os
from pathlib import Path

import pytest

from mcgeo.cli import main
from mcgeo.runs.sweep import Costs
from mcgeo.runs.sweep_estimate import costs_of, liquid_plans
from mcgeo.runs.sweep_plan import load_sweep
from mcgeo.runs.sweep_shards import shard_plans
from tests.cluster.conftest import tables


def sweep(*options: str) -> int:
    return main(["sweep", "run.yaml", "--workers", "1", "-q", *options])


def test_shards_of_one_folder(swept: Path, serial: dict[str, bytes], capsys: pytest.CaptureFixture[str]) -> None:
    assert sweep("--out", "out", "--shard", "2/3") in (0, 3)
    assert "shard               2/3\n" in capsys.readouterr().out
    assert sweep("--out", "out", "--gather") == 4
    assert "shards not finished  1/3\n" in capsys.readouterr().out
    summary = json.loads(Path("out/sweep.json").read_text())
    assert summary["unfinished_shards"] == ["1/3"] and summary["missing"] == 3
    for number in (1, 3):
        # The third has nothing to do: there are two liquids.
        assert sweep("--out", "out", "--shard", f"{number}/3") in (0, 3)
    assert sweep("--out", "out", "--gather") in (0, 3)
    assert tables(swept / "out") == serial
    assert json.loads(Path("out/sweep.json").read_text())["unfinished_shards"] == []


def test_shards_of_folders_of_their_own(swept: Path, serial: dict[str, bytes]) -> None:
    for number in (1, 2):
        assert sweep("--out", f"part{number}", "--shard", f"{number}/2") in (0, 3)
    assert sweep("--out", "all", "--gather", "part1") == 4
    assert tables(swept / "all") != serial
    assert sweep("--out", "all", "--gather", "part1", "part2") in (0, 3)
    assert tables(swept / "all") == serial
    # The folder is that of a whole sweep: nothing is left to be done, and its liquids are there.
    before = {path: path.stat().st_mtime_ns for path in (swept / "all/liquids").glob("*/*")}
    assert len(before) == 2
    assert sweep("--out", "all") in (0, 3)
    assert {path: path.stat().st_mtime_ns for path in (swept / "all/liquids").glob("*/*")} == before


@pytest.mark.parametrize("of", [1, 2, 3, 7])
def test_division(tmp_path: Path, of: int) -> None:
    """Every point once; no shard has more than its share and one liquid; a liquid that is sampled is not divided."""
    (tmp_path / "run.yaml").write_text(
        "state: {kind: laughlin, exponent: 3}\n"
        "sweep:\n  axes:\n"
        "    - {key: state.electrons, values: [4, 6, 8, 10, 12, 14, 16, 18, 20]}\n"
        "    - {key: problem.mass.ratio, from: 1, to: 4, points: 5}\n"
    )
    plan = load_sweep(tmp_path / "run.yaml")
    costs = costs_of(plan, liquid_plans(plan))
    parts = shard_plans(plan, costs, of)
    assert sorted(point for part in parts for point in part.points) == sorted(plan.points)
    assert sum(len(part.liquids) for part in parts) == len(plan.liquids) == 9
    loads = [sum(costs.liquids[liquid] + costs.optimum * 5 for liquid in part.liquids) for part in parts]
    largest = max(costs.liquids.values()) + costs.optimum * 5
    assert max(loads) <= sum(loads) / of + largest + 0.01


def test_many_problems_of_a_liquid_that_needs_no_sampling_are_divided(tmp_path: Path) -> None:
    (tmp_path / "run.yaml").write_text(
        "state: {catalogue: laughlin-1/3}\n"
        "sweep: {axes: [{key: problem.mass.ratio, from: 1, to: 4, points: 100}]}\n"
    )
    plan = load_sweep(tmp_path / "run.yaml")
    parts = shard_plans(plan, Costs(dict.fromkeys(plan.liquids, 0.0), 0.01, dict.fromkeys(plan.liquids, 0)), 8)
    assert sorted(point for part in parts for point in part.points) == sorted(plan.points)
    assert {len(part.points) for part in parts} <= {12, 13}


def test_what_is_no_shard(swept: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for text in ("0/3", "4/3", "3", "1/0", "a/b", "1/3/5", "-1/3", "1.0/3"):
        assert sweep(f"--shard={text}") == 2
        assert f"--shard {text}: must be I/N" in capsys.readouterr().err
    assert sweep("--shard", "1/2", "--gather") == 2
    os.mkdir("empty")
    assert sweep("--out", "out", "--gather", "empty") == 2
    assert "empty: not the folder of a sweep" in capsys.readouterr().err
    assert not (swept / "out").exists()
