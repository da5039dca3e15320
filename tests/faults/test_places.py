"""What only building and running can find wrong still has its place in the file, and is said once."""

from __future__ import annotations

from pathlib import Path

import pytest

from mcgeo.cli import main
from mcgeo.runs.places import placed

STATE = "state: {kind: laughlin, exponent: 3, electrons: 4}\n"
SEA = "state: {kind: fermi_sea, filling: 1/2, electrons: §}\n"

# command, configuration, and the beginnings of all lines; the exit code is 2 for each.
FAULTS = {
    "cell too long": ("check", STATE + "cell: {tau: [0, 90]}\n", ["2:7: cell: the cell is too elongated"]),
    "open shell": ("check", SEA.replace("§", "8"), ["1:51: state.electrons: 8 electrons do not close a shell"]),
    "points too far": (
        "sample", SEA.replace("§", "2, points: [[0, 0], [9, 0]]"), ["1:62: state.points: the points of a sea"]),
    "mass out of reach": (
        "scan", STATE + "problem: {mass: {ratio: 2e4}, interaction: {kind: gaussian, range: 1}}\n",
        ["2:17: problem.mass: hole and orbit", "2:44: problem.interaction: ", "1:1: scan.stretch.from: "]),
    "range out of reach": (
        "check", STATE + "scan:\n  stretch: {from: -6, to: 1}\n", ["3:19: scan.stretch.from: hole and orbit metric"]),
    "masses without measure": (
        "check", STATE + "material: {mass: {along_axes: [1e-300, 1e300]}, permittivity: 1, field_tesla: 1}\n",
        ["2:1: material: a metric needs"]),
    "field of nothing": (
        "check", STATE + "material: {name: AlAs, field_tesla: 1e-320}\n",
        ["2:1: material: masses, permittivity or field are too large or too small"]),
    "interaction without background": (
        "scan", STATE + "geometry: {kind: disk}\nproblem: {interaction: {kind: pseudopotentials, values: {1: 1}}}\n",
        ["3:24: problem.interaction: must be an interaction V(r) for a droplet"]),
    "length without a unit": (
        "check", STATE + "problem:\n  interaction: {kind: square_well, width_nm: 12}\n",
        ["3:36: problem.interaction.width_nm: needs the magnetic length"]),
    "screening without a unit": (
        "check", STATE + "problem: {interaction: {kind: yukawa, screening_per_nm: 1}}\n",
        ["2:39: problem.interaction.screening_per_nm: needs the magnetic length"]),
    "length given twice": (
        "check", STATE + "problem: {interaction: {kind: square_well, width: 1, width_nm: 12}}\n",
        ["2:54: problem.interaction.width_nm: does not go with width"]),
}  # fmt: skip


@pytest.mark.parametrize("fault", FAULTS)
def test_late_faults_have_places(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], fault: str
) -> None:
    command, text, beginnings = FAULTS[fault]
    monkeypatch.chdir(tmp_path)
    Path("run.yaml").write_text(text)
    assert main([command, "run.yaml"]) == 2
    captured = capsys.readouterr()
    lines = captured.err.splitlines()
    assert captured.out == "" and len(lines) == len(beginnings)
    for line, beginning in zip(lines, beginnings, strict=True):
        assert line.startswith(f"run.yaml:{beginning}")
    assert [path.name for path in Path().iterdir()] == ["run.yaml"]


def test_other_lines_stay_as_they_are(tmp_path: Path) -> None:
    path = tmp_path / "run.yaml"
    path.write_text(STATE)
    lines = ["--compare needs a state", "run.yaml:1:1: state: missing", "nothing.known: x", "no_results: not there"]
    assert placed(lines, path) == lines
    assert placed(["state.electrons: x"], tmp_path / "liquid.h5") == ["state.electrons: x"]
    assert placed(["state.electrons: x"], path) == [f"{path}:1:49: state.electrons: x"]
