"""Sweeps by the command: tables, sharing, repetition, failures, status."""

from __future__ import annotations

import csv
import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
import xarray

from mcgeo import __version__
from mcgeo.errors import GeometryError
from mcgeo.runs import sweep_tasks
from tests.cli.conftest import Answer

Command = Callable[..., Answer]

STATE = "state: {kind: laughlin, exponent: 3, electrons: 4}\n"
SAMPLING = "sampling: {walkers: 8, sweeps: 480, equilibration: 100, blocks: 8, seed: 5}\n"
RATIOS = "    - {key: problem.mass.ratio, values: [1, 2, 4]}\n"
INTERACTIONS = "    - {key: problem.interaction, values: [{kind: coulomb}, {kind: yukawa, screening: 1}]}\n"
LIQUIDS = "    - together: [{key: state.exponent, values: [3, 5]}, {key: state.electrons, values: [4, 3]}]\n"
GRID = f"{STATE}{SAMPLING}sweep:\n  axes:\n{RATIOS}{INTERACTIONS}{LIQUIDS}"
ONE_LIQUID = f"{STATE}{SAMPLING}sweep:\n  axes:\n{RATIOS}"
FOLDER = Path("run_sweep")


def sweep(mcgeo: Command, text: str, *options: str, workers: str = "1") -> Answer:
    Path("run.yaml").write_text(text)
    return mcgeo("sweep", "run.yaml", "--workers", workers, "--quiet", *options)


def rows(folder: Path = FOLDER) -> list[dict[str, str]]:
    """The table; units are left out of its headings."""
    lines = [line for line in (folder / "sweep.csv").read_text().splitlines() if not line.startswith("#")]
    headings, *table = list(csv.reader(lines))
    return [dict(zip((name.partition(" [")[0] for name in headings), row, strict=True)) for row in table]


def tables(folder: Path = FOLDER) -> tuple[bytes, bytes]:
    return (folder / "sweep.csv").read_bytes(), (folder / "sweep.h5").read_bytes()


def contents(folder: Path, pattern: str) -> dict[Path, tuple[int, bytes]]:
    return {path: (path.stat().st_mtime_ns, path.read_bytes()) for path in folder.glob(pattern)}


def test_every_row_is_the_scan_of_its_point(mcgeo: Command) -> None:
    answer = sweep(mcgeo, GRID)
    assert answer.code == 0 and "12 over 2 liquids" in answer.out and answer.err == ""
    table = rows()
    assert len(table) == 12 and all(row["status"] == "done" for row in table)
    assert [row["problem.mass.ratio"] for row in table] == ["1"] * 4 + ["2"] * 4 + ["4"] * 4
    row = table[10]
    assert (row["state.exponent"], json.loads(row["problem.interaction"])) == ("3", {"kind": "yukawa", "screening": 1})
    problem = "problem: {mass: {ratio: 4}, interaction: {kind: yukawa, screening: 1}}\n"
    Path("single.yaml").write_text(STATE + SAMPLING + problem)
    found = json.loads(mcgeo("scan", "single.yaml", "--json", "--quiet").out)
    for name, value in found["optimum"].items():
        if isinstance(value, float):
            assert float(row[name]) == value, name
    assert row["shape_verdict"] == found["optimum"]["shape_verdict"]
    assert row["run_verdict"] == found["diagnostics"]["verdict"] == "converged"
    assert float(row["mass_stretch"]) == found["problem"]["mass_stretch"]
    assert (row["label"], row["filling"], row["seed"]) == (found["state"]["label"], "1/3", "5")


def test_the_file_opens_as_a_labelled_grid(mcgeo: Command) -> None:
    exclude = "  exclude:\n    - {problem.mass.ratio: 1, state.exponent: 5}\n"
    assert sweep(mcgeo, GRID + exclude).code == 0
    with xarray.open_dataset(FOLDER / "sweep.h5", engine="h5netcdf") as grid:
        assert dict(grid.sizes) == {"problem.mass.ratio": 3, "problem.interaction": 2, "state.exponent": 2}
        assert set(grid.coords) == {*grid.sizes, "state.electrons"}
        assert grid["state.electrons"].dims == ("state.exponent",) and grid["energy"].attrs["units"].startswith("e^2")
        chosen = grid["stretch"].sel({"problem.mass.ratio": 4, "state.exponent": 5})
        wanted = [row for row in rows() if row["problem.mass.ratio"] == "4" and row["state.exponent"] == "5"]
        assert chosen.values.tolist() == [float(row["stretch"]) for row in wanted]
        left_out = grid.sel({"problem.mass.ratio": 1, "state.exponent": 5})
        assert bool(np.isnan(left_out["stretch"]).all()) and set(left_out["status"].values) == {""}
        assert int(np.isnan(grid["stretch"]).sum()) == 2
    assert len(rows()) == 10


def test_the_same_command_again_does_nothing(mcgeo: Command) -> None:
    first = sweep(mcgeo, GRID)
    before = {**contents(FOLDER, "points/*"), **contents(FOLDER, "liquids/*/liquid.h5")}
    written = tables()
    again = sweep(mcgeo, GRID)
    assert (again.out, again.code) == (first.out, first.code)
    assert {**contents(FOLDER, "points/*"), **contents(FOLDER, "liquids/*/liquid.h5")} == before
    assert tables() == written


def test_changed_axes_take_what_is_there(mcgeo: Command) -> None:
    sweep(mcgeo, ONE_LIQUID)
    before = {**contents(FOLDER, "points/*"), **contents(FOLDER, "liquids/*/liquid.h5")}
    earlier = {row["point"]: row for row in rows()}
    sweep(mcgeo, ONE_LIQUID.replace("[1, 2, 4]", "[2, 3, 4]"))
    after = {**contents(FOLDER, "points/*"), **contents(FOLDER, "liquids/*/liquid.h5")}
    assert before.items() <= after.items()
    (added,) = after.keys() - before.keys()
    table = {row["problem.mass.ratio"]: row for row in rows()}
    assert list(json.loads(added.read_text())["rows"]) == [table["3"]["point"]]
    assert table["4"] == earlier[table["4"]["point"]] and len(table) == 3


def test_processes_change_no_bit(mcgeo: Command) -> None:
    sweep(mcgeo, GRID, "--out", "alone")
    assert sweep(mcgeo, GRID, "--out", "two", workers="2").code == 0
    assert tables(Path("alone")) == tables(Path("two"))
    assert {path.name for path in Path("two").iterdir()} == {path.name for path in Path("alone").iterdir()}


def test_a_point_without_an_answer_is_listed_and_the_others_are_done(mcgeo: Command) -> None:
    answer = sweep(mcgeo, ONE_LIQUID.replace("[1, 2, 4]", "[1, 20000, 4]"))
    assert answer.code == 4
    assert "1; --retry tries them again" in answer.out
    assert "failed at problem.mass.ratio 20000: " in answer.out and "apart" in answer.out
    assert [row["status"] for row in rows()] == ["done", "failed", "done"]
    assert rows()[1]["stretch"] == "nan"
    found = json.loads((FOLDER / "sweep.json").read_text())
    assert (found["done"], found["failed"], found["missing"]) == (2, 1, 0)
    assert found["failures"][0]["point"] == {"problem.mass.ratio": 20000}
    assert "apart" in found["failures"][0]["error"]


def test_failed_points_are_tried_again_when_told_to(mcgeo: Command, monkeypatch: pytest.MonkeyPatch) -> None:
    sweep(mcgeo, ONE_LIQUID, "--out", "whole")
    optimum = sweep_tasks.optimum

    def failing(liquid: Any, problem: Any, shared: Any) -> Any:
        if problem["mass"]["ratio"] == 2.0:
            raise GeometryError("not today")
        return optimum(liquid, problem, shared)

    with monkeypatch.context() as patch:
        patch.setattr(sweep_tasks, "optimum", failing)
        assert sweep(mcgeo, ONE_LIQUID).code == 4
        assert "not today" in sweep(mcgeo, ONE_LIQUID, "--retry").out
    # Not of itself: whoever reads the message decides.
    answer = sweep(mcgeo, ONE_LIQUID)
    assert answer.code == 4 and "not today" in answer.out
    assert sweep(mcgeo, ONE_LIQUID, "--retry").code == 0
    assert tables() == tables(Path("whole"))


def test_a_liquid_that_cannot_be_is_a_fault_of_the_configuration(mcgeo: Command) -> None:
    text = ONE_LIQUID.replace("{kind: laughlin, exponent: 3, electrons: 4}", "{kind: fermi_sea, filling: 1/2}")
    text = text.replace(RATIOS, "    - {key: state.electrons, values: [7, 8, 9]}\n")
    for command in ("check", "sweep"):
        Path("run.yaml").write_text(text)
        answer = mcgeo(command, "run.yaml")
        assert answer.code == 2 and "state.electrons 8" in answer.err
    assert not FOLDER.exists()


def test_runs_that_have_not_converged_are_counted(mcgeo: Command) -> None:
    answer = sweep(mcgeo, ONE_LIQUID.replace("sweeps: 480", "sweeps: 8"), "--json")
    found = json.loads(answer.out)
    assert answer.code == 3 and (found["done"], found["not_converged"]) == (3, 3)
    assert {row["run_verdict"] for row in rows()} == {"short"}


def test_check_tells_points_liquids_time_and_disk(mcgeo: Command) -> None:
    Path("run.yaml").write_text(GRID)
    found = json.loads(mcgeo("check", "run.yaml", "--json").out)
    assert found["points"] == 12
    assert [liquid["points"] for liquid in found["liquids"]] == [6, 6]
    assert found["estimated_seconds"] == pytest.approx(
        found["estimated_sampling_seconds"] + found["estimated_scan_seconds"], abs=0.11
    )
    assert found["estimated_megabytes"] > 0.0
    text = mcgeo("check", "run.yaml").out
    assert "liquids to sample" in text and "serves 6 points" in text
    assert not FOLDER.exists()


def test_check_of_a_single_run_counts_its_scan(mcgeo: Command) -> None:
    problem = "problem: {mass: {ratio: 2}, variation: two_metric, level_mixing: 1}\n"
    found = {}
    for road in ("plane", "torus"):
        scan = f"scan: {{road: {road}, stretch: {{from: 0, to: 1, points: 8}}}}\n"
        Path("run.yaml").write_text(STATE + SAMPLING.replace("480", "48000") + problem + scan)
        found[road] = json.loads(mcgeo("check", "run.yaml", "--json").out)
        parts = found[road]["estimated_sampling_seconds"] + found[road]["estimated_scan_seconds"]
        assert found[road]["estimated_seconds"] == pytest.approx(parts, abs=0.11)
    assert found["plane"]["estimated_scan_seconds"] > 0.0
    # The torus road samples every metric by itself.
    assert found["torus"]["estimated_megabytes"] == pytest.approx(8 * found["plane"]["estimated_megabytes"], abs=0.1)


def test_status_reads_the_folder(mcgeo: Command) -> None:
    sweep(mcgeo, ONE_LIQUID.replace("[1, 2, 4]", "[1, 2]"))
    whole = json.loads(mcgeo("sweep", str(FOLDER), "--status", "--json").out)
    assert (whole["points"], whole["done"], whole["left"], whole["estimated_seconds_left"]) == (2, 2, 0, 0.0)
    Path("run.yaml").write_text(GRID)
    found = json.loads(mcgeo("sweep", "run.yaml", "--status", "--json").out)
    assert (found["points"], found["done"], found["failed"], found["left"]) == (12, 2, 0, 10)
    assert [(liquid["complete"], liquid["points_left"]) for liquid in found["liquids"]] == [(True, 4), (False, 6)]
    assert found["estimated_seconds_left"] >= 0.0
    assert "2 of 12" in mcgeo("sweep", "run.yaml", "--status").out
    assert mcgeo("sweep", "run.yaml", "--status", "--out", "elsewhere").code == 2


def test_a_damaged_file_of_rows_is_named(mcgeo: Command) -> None:
    sweep(mcgeo, ONE_LIQUID)
    (path,) = (FOLDER / "points").iterdir()
    path.write_bytes(path.read_bytes()[:-9])
    answer = sweep(mcgeo, ONE_LIQUID)
    assert answer.code == 2 and str(path) in answer.err and "remove it" in answer.err
    path.unlink()
    assert sweep(mcgeo, ONE_LIQUID).code == 0


def test_rows_of_several_versions_are_told(mcgeo: Command) -> None:
    assert "versions" not in sweep(mcgeo, ONE_LIQUID).out
    sweep(mcgeo, ONE_LIQUID.replace("[1, 2, 4]", "[1, 2, 3, 4]"))
    path = max((FOLDER / "points").iterdir(), key=lambda path: path.stat().st_mtime_ns)
    data = json.loads(path.read_text())
    path.write_text(json.dumps({**data, "version": "0.0.9"}))
    answer = sweep(mcgeo, ONE_LIQUID.replace("[1, 2, 4]", "[1, 2, 3, 4]"))
    assert f"0.0.9, {__version__}; remove points/" in answer.out
    assert {row["problem.mass.ratio"]: row["version"] for row in rows()}["3"] == "0.0.9"


def test_the_file_tells_its_configuration(mcgeo: Command) -> None:
    sweep(mcgeo, ONE_LIQUID)
    with h5py.File(FOLDER / "sweep.h5") as file:
        config = json.loads(file.attrs["config"])
    assert config["state"]["electrons"] == 4
    assert config["sweep"] == {"axes": [{"key": "problem.mass.ratio", "values": [1, 2, 4]}]}


def test_droplets_take_part_and_what_they_cannot_answer_fails_alone(mcgeo: Command) -> None:
    variations = "    - {key: problem.variation, values: [projected, rigid]}\n"
    text = f"{STATE}{SAMPLING}geometry: {{kind: disk}}\nproblem: {{level_mixing: 1}}\nsweep:\n  axes:\n{variations}"
    answer = sweep(mcgeo, text)
    assert answer.code == 4 and "must be projected for a droplet, not rigid" in answer.out
    assert [row["status"] for row in rows()] == ["done", "failed"]


def test_units_of_a_material_are_columns(mcgeo: Command) -> None:
    axis = "    - {key: material.field_tesla, values: [4, 16]}\n"
    text = f"{STATE}{SAMPLING}material: {{name: AlAs}}\nsweep:\n  axes:\n{axis}"
    assert sweep(mcgeo, text).code == 0
    first, second = rows()
    assert float(first["magnetic_length_nm"]) == pytest.approx(2.0 * float(second["magnetic_length_nm"]))
    headings = (FOLDER / "sweep.csv").read_text().splitlines()[2]
    assert "material.field_tesla [T]" in headings and "energy_mev [meV per electron]" in headings
    with h5py.File(FOLDER / "sweep.h5") as file:
        assert file["material.field_tesla"].attrs["units"] == "T"
        assert file["magnetic_length_nm"].attrs["units"] == "nm"
