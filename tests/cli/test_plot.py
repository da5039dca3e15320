"""The command that draws: every figure from a result file alone, with its numbers."""

from __future__ import annotations

import csv
from pathlib import Path

import pytest

from mcgeo.cli import main

LIQUID = """
state: {kind: laughlin, exponent: 3, electrons: 8}
sampling: {walkers: 8, sweeps: 400, blocks: 4, equilibration: 100, seed: 5, threads: 1}
problem: {mass: {ratio: 4.0}}
scan: {stretch: {from: -0.2, to: 0.8, points: 11}}
"""
DROPLET = """
state: {kind: laughlin, exponent: 3, electrons: 6}
geometry: {kind: disk}
sampling: {walkers: 8, sweeps: 400, blocks: 4, equilibration: 100, seed: 5, threads: 1}
problem: {mass: {ratio: 2.0}}
scan: {stretch: {from: 0.0, to: 0.6, points: 7}}
"""


@pytest.fixture(scope="module")
def results(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    folders = {}
    for name, text in (("liquid", LIQUID), ("droplet", DROPLET)):
        folder = tmp_path_factory.mktemp(name)
        config = folder / f"{name}.yaml"
        config.write_text(text)
        assert main(["sample", str(config), "--out", str(folder / "results"), "-q"]) in (0, 3)
        folders[name] = folder / "results"
    return folders


def rows(path: Path) -> list[list[str]]:
    lines = [line for line in path.read_text().splitlines() if not line.startswith("#")]
    return list(csv.reader(lines))


@pytest.mark.parametrize(
    ("name", "what", "columns"),
    [
        ("liquid", "hole", 3),
        ("liquid", "energy", 4),
        ("liquid", "structure", 5),
        ("liquid", "correlation", 6),
        ("liquid", "occupations", 3),
        ("liquid", "trace", 9),
        ("droplet", "density", 3),
        ("droplet", "energy", 4),
        ("droplet", "trace", 9),
    ],
)
def test_figures_with_their_numbers(
    results: dict[str, Path], tmp_path: Path, capsys: pytest.CaptureFixture[str], name: str, what: str, columns: int
) -> None:
    assert main(["plot", what, str(results[name]), "--out", str(tmp_path), "--format", "svg"]) == 0
    written = capsys.readouterr().out.split()
    assert written == [str(tmp_path / f"{what}.svg"), str(tmp_path / f"{what}.csv")]
    assert b"<text" in (tmp_path / f"{what}.svg").read_bytes(), "text stays text"
    table = rows(tmp_path / f"{what}.csv")
    assert len(table[0]) == columns
    assert len(table) >= 5
    assert all(float(cell) == float(cell) for row in table[1:] for cell in row if cell)


@pytest.mark.parametrize(("name", "what"), [("droplet", "hole"), ("liquid", "density")])
def test_what_cannot_be_drawn_is_refused(
    results: dict[str, Path], tmp_path: Path, capsys: pytest.CaptureFixture[str], name: str, what: str
) -> None:
    assert main(["plot", what, str(results[name]), "--out", str(tmp_path)]) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    assert len(captured.err.strip().splitlines()) == 1
    assert not list(tmp_path.iterdir())


def test_another_problem_can_be_drawn(results: dict[str, Path], tmp_path: Path) -> None:
    other = tmp_path / "other.yaml"
    other.write_text(LIQUID.replace("ratio: 4.0", "ratio: 9.0, angle_degrees: 40"))
    for out, options in (("own", []), ("other", ["--problem", str(other)])):
        where = str(tmp_path / out)
        assert main(["plot", "energy", str(results["liquid"]), "--out", where, "--format", "svg", *options]) == 0
    assert rows(tmp_path / "own" / "energy.csv") != rows(tmp_path / "other" / "energy.csv")
