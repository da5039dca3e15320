"""``scan`` and ``plot`` on a droplet."""

from __future__ import annotations

import csv
import json
from collections.abc import Callable
from pathlib import Path

import pytest

from tests.cli.conftest import SMALL

DISK = SMALL + "geometry: {kind: disk}\n"


@pytest.fixture
def disk(tmp_path: Path) -> Path:
    """``disk.yaml`` in the current folder."""
    path = tmp_path / "disk.yaml"
    path.write_text(DISK)
    return path


def test_scan(mcgeo: Callable, small: Path, disk: Path) -> None:
    answer = mcgeo("scan", "disk.yaml", "-q", "--json")
    assert answer.code == 0
    found, liquid = json.loads(answer.out), json.loads(mcgeo("scan", "run.yaml", "-q", "--json").out)
    for group in ("state", "problem", "optimum"):
        assert set(found[group]) - {"sector"} == set(liquid[group]) - {"sector"}
    assert found["state"]["label"] == "Laughlin droplet 1/3"
    assert found["optimum"]["angle_degrees"] == pytest.approx(20.0)
    assert found["optimum"]["interior"] and 0.0 < found["optimum"]["stretch"] < 0.35
    assert json.loads(Path("disk_results/scan.json").read_text()) == found
    with open("disk_results/curve.csv", encoding="utf-8") as file:
        rows = [row for row in csv.reader(file) if not row[0].startswith("#")]
    assert len(rows) == 7
    assert float(rows[1][1]) == pytest.approx(found["curve"][0]["energy"])


def test_scan_of_a_sampled_droplet_for_another_problem(mcgeo: Callable, disk: Path) -> None:
    mcgeo("scan", "disk.yaml", "-q")
    first = json.loads(Path("disk_results/scan.json").read_text())
    disk.write_text(DISK.replace("problem:", "problem:\n  interaction: {kind: gaussian, range: 1.0}\n  level: 1"))
    answer = mcgeo("scan", "disk.yaml", "-q", "--json", "--liquid", "disk_results/liquid.h5")
    second = json.loads(answer.out)
    assert second["problem"]["interaction_name"] == "Gaussian of range 1 l_B"
    assert abs(second["optimum"]["energy"] - first["optimum"]["energy"]) > 0.1


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (("problem:", "problem:\n  variation: rigid\n  level_mixing: 1.0"), "must be projected for a droplet"),
        (
            ("problem:", "problem:\n  interaction: {kind: pseudopotentials, values: {1: 1.0}}"),
            "must be an interaction V(r) for a droplet",
        ),
        (("scan:", "scan:\n  road: torus"), "the torus road needs geometry.kind: torus, not disk"),
    ],
    ids=["rigid", "pseudopotentials", "road"],
)
def test_refusals_before_anything_runs(mcgeo: Callable, disk: Path, change: tuple[str, str], message: str) -> None:
    disk.write_text(DISK.replace(*change))
    answer = mcgeo("scan", "disk.yaml", "-q")
    assert answer.code == 2
    assert message in answer.err
    assert not Path("disk_results").exists()


def test_plots(mcgeo: Callable, disk: Path) -> None:
    mcgeo("scan", "disk.yaml", "-q")
    answer = mcgeo("plot", "energy", "disk_results", "--format", "png")
    assert answer.code == 0
    assert Path("disk_results/energy.png").stat().st_size > 1000
    refused = mcgeo("plot", "hole", "disk_results")
    assert refused.code == 2
    assert "energy, density and trace can be drawn, not hole" in refused.err
