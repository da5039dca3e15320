"""Commands on a liquid of the catalogue: at once, with its origin told, and no walker run."""

from __future__ import annotations

import json
import math
from collections.abc import Callable
from pathlib import Path

import pytest

from mcgeo.runs.state_config import CATALOGUE_NAMES
from tests.cli.conftest import Answer, python_process

Command = Callable[..., Answer]

WELL = """\
state: {catalogue: laughlin-1/3}
problem: {mass: {ratio: 4.0}}
scan: {stretch: {from: 0.0, to: 0.6, points: 4}}
"""
RESULTS = Path("well_results")
ORIGIN_KEYS = {
    "electrons", "seed", "walkers", "sweeps", "equilibration", "mcgeo_version", "libraries", "verdict"
}  # fmt: skip


@pytest.fixture
def well(tmp_path: Path) -> Path:
    path = tmp_path / "well.yaml"
    path.write_text(WELL)
    return path


def test_scan_tells_numbers_and_origin(mcgeo: Command, well: Path) -> None:
    answer = mcgeo("scan", "well.yaml", "--json")
    assert answer.code == 0 and answer.err == ""
    found = json.loads(answer.out)
    state, best = found["state"], found["optimum"]
    assert state["catalogue"] == "laughlin-1/3" and state["filling"] == "1/3"
    assert state["origin"]["large"].keys() == state["origin"]["small"].keys() == ORIGIN_KEYS
    assert state["liquid_electrons"] == state["origin"]["large"]["electrons"] > state["origin"]["small"]["electrons"]
    for name in ("stretch", "energy", "response", "stiffness_along", "gain_isotropic"):
        parts = best["error_parts"][f"{name}_error"]
        assert 0.0 < parts["statistical"] <= best[f"{name}_error"]
        assert math.hypot(parts["statistical"], parts["finite_size"]) == pytest.approx(best[f"{name}_error"])
    assert [len(row) for row in best["error_parts"]["stiffness_error"]["finite_size"]] == [2, 2]
    assert json.loads((RESULTS / "scan.json").read_text()) == found
    assert sorted(path.name for path in RESULTS.iterdir()) == ["curve.csv", "scan.json"]
    head = [line for line in (RESULTS / "curve.csv").read_text().splitlines() if line.startswith("#")]
    assert "catalogue laughlin-1/3" in head[1] and f"seed {state['origin']['large']['seed']}" in head[1]


def test_text_tells_origin(mcgeo: Command, well: Path) -> None:
    answer = mcgeo("scan", "well.yaml")
    assert "statistical" in answer.out and "finite size" in answer.out
    assert "sampled " in answer.out and "compared with" in answer.out and "acceptance" not in answer.out


def test_circle_has_no_parts_of_an_angle(mcgeo: Command, well: Path) -> None:
    well.write_text(WELL.replace("ratio: 4.0", "ratio: 1.0"))
    parts = json.loads(mcgeo("scan", "well.yaml", "--json").out)["optimum"]["error_parts"]
    assert parts["angle_error"] == {"statistical": None, "finite_size": None}


def test_conjugate_and_material(mcgeo: Command, well: Path) -> None:
    well.write_text(
        "state: {catalogue: laughlin-1/3, conjugate: true}\nmaterial: {name: AlAs, density_per_cm2: 2.0e+11}\n"
    )
    found = json.loads(mcgeo("scan", "well.yaml", "--json").out)
    assert found["state"]["filling"] == "2/3" and found["state"]["label"] == "hole conjugate of Laughlin 1/3"
    large = found["state"]["origin"]["large"]["electrons"]
    assert found["state"]["liquid_electrons"] == 2 * large
    # The density at filling 2/3: n = nu e B/h, with e/h = 2.41798924e10 per cm^2 and tesla (CODATA 2022).
    assert found["units"]["field_tesla"] == pytest.approx(2.0e11 / (2.0 / 3.0 * 2.41798924e10), rel=1e-7)
    assert found["optimum"]["energy_error_mev"] > 0.0


@pytest.mark.parametrize("what", ["hole", "energy", "structure", "correlation", "occupations"])
def test_figures(mcgeo: Command, well: Path, what: str) -> None:
    answer = mcgeo("plot", what, "well.yaml", "--format", "svg")
    assert answer.code == 0
    assert sorted(path.name for path in RESULTS.iterdir()) == [f"{what}.csv", f"{what}.svg"]
    for path in RESULTS.iterdir():
        assert "catalogue laughlin-1/3" in path.read_text()


@pytest.mark.parametrize("what", ["density", "trace"])
def test_what_only_walkers_leave_cannot_be_drawn(mcgeo: Command, well: Path, what: str) -> None:
    answer = mcgeo("plot", what, "well.yaml")
    assert answer.code == 2 and "hole, energy, structure, correlation, occupations can be drawn" in answer.err
    assert not RESULTS.exists()


def test_configuration_of_a_state_to_be_sampled_is_not_drawn(mcgeo: Command, small: Path) -> None:
    answer = mcgeo("plot", "hole", "run.yaml")
    assert answer.code == 2 and "mcgeo sample run.yaml" in answer.err


def test_nothing_to_sample(mcgeo: Command, well: Path) -> None:
    answer = mcgeo("sample", "well.yaml")
    assert answer.code == 2 and "laughlin-1/3 is sampled already, there is nothing to sample" in answer.err
    assert not RESULTS.exists()
    answer = mcgeo("scan", "well.yaml", "--compare")
    assert answer.code == 2 and "--compare needs a state that is sampled" in answer.err


def test_check_describes(mcgeo: Command, well: Path) -> None:
    found = json.loads(mcgeo("check", "well.yaml", "--json").out)
    assert found["catalogue"] == "laughlin-1/3" and found["electrons"] > found["electrons_compared_with"]


def test_liquids_lists_every_entry(mcgeo: Command) -> None:
    rows = json.loads(mcgeo("liquids", "--json").out)["liquids"]
    assert tuple(row["catalogue"] for row in rows) == CATALOGUE_NAMES
    assert all(row["energy_plane"]["error"] > 0.0 for row in rows)
    table = mcgeo("liquids").out.splitlines()
    assert [line.split()[0] for line in table[1 : 1 + len(rows)]] == list(CATALOGUE_NAMES)


FAULTS = [
    ("state: {catalogue: §laughlin-1/33}", "state.catalogue: must be one of laughlin-1, laughlin-1/3,"),
    ("state: {catalogue: laughlin-1/3}\n§cell: {shape: square}", "cell: a liquid of the catalogue is sampled already"),
    ("state: {catalogue: laughlin-1/3}\n§sampling: {seed: 2}", "sampling: a liquid of the catalogue is sampled"),
    ("state: {catalogue: laughlin-1/3}\n§geometry: {kind: torus}", "geometry: a liquid of the catalogue is sampled"),
    ("state: {catalogue: laughlin-1/3}\nscan: {road: §torus}", "scan.road: must be plane for a liquid of the catal"),
    ("state: {catalogue: laughlin-1/3, §electrons: 10}", "state.electrons: does not go with kind catalogue"),
    ("state: {kind: laughlin, exponent: 3, electrons: 9, §catalogue: laughlin-1/3}", "state.catalogue: does not go"),
    *(
        (f"state: {{catalogue: {name}, conjugate: §true}}", "state.conjugate: a conjugate exists for fermions below")
        for name in ("laughlin-1", "laughlin-1/2", "laughlin-1/4", "moore_read-1")
    ),
]


@pytest.mark.parametrize(("text", "expected"), FAULTS)
def test_faults_have_their_place(mcgeo: Command, well: Path, text: str, expected: str) -> None:
    before, after = text.split("§")
    well.write_text(before + after + "\n")
    line, column = before.count("\n") + 1, len(before) - before.rfind("\n")
    answer = mcgeo("scan", "well.yaml")
    assert answer.code == 2 and answer.err.startswith(f"well.yaml:{line}:{column}: {expected}")
    assert not RESULTS.exists()


PROGRAM = """
import json
import numpy as np
from mcgeo.cli import main
from mcgeo.kernels.pair_histogram import add_pair_counts
from tests.unit.test_floors import signatures

assert main(["scan", "well.yaml", "-q"]) == 0
print(json.dumps(signatures()))
place = np.zeros((2, 8))
add_pair_counts(place, place, 0.0, 1.0, 1.0, 0.1, np.zeros((2, 8), dtype=np.int64))
print(json.dumps(signatures()))
"""


def test_no_kernel_is_compiled(well: Path, tmp_path: Path) -> None:
    process = python_process(tmp_path, "-c", PROGRAM)
    out, err = process.communicate(timeout=300)
    assert process.returncode == 0, err
    after_scan, after_kernel = (json.loads(line) for line in out.splitlines()[-2:])
    assert after_scan == {} and after_kernel != {}
