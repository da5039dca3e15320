"""What the commands print, return and leave behind."""

from __future__ import annotations

import json
import math
import shutil
from collections.abc import Callable
from pathlib import Path

import h5py
import pytest

from mcgeo.cli import main
from tests.cli.conftest import ROOT, SMALL, Answer, python_process

Command = Callable[..., Answer]

SAMPLE_KEYS = {
    "state", "interaction", "energy_torus", "energy_plane", "occupations", "acceptance", "step", "seed",
    "seconds", "moves_per_second", "complete", "diagnostics",
}  # fmt: skip
STATE_KEYS = {"kind", "exponent", "electrons", "metric", "conjugate", "filling", "statistics", "label"}
DIAGNOSTICS_KEYS = {
    "acceptance", "least_acceptance", "autocorrelation_time", "effective_samples", "bulk_samples", "tail_samples",
    "r_hat", "r_hat_limit", "blocking", "drift", "rules_z", "verdict", "reasons", "sweeps_to_add",
}  # fmt: skip
PROBLEM_KEYS = {
    "mass", "interaction", "level", "interaction_name", "mass_stretch", "mass_angle_degrees",
    "orbit_aspect_ratio",
}  # fmt: skip
OPTIMUM_KEYS = {
    "stretch", "stretch_error", "angle_degrees", "angle_error", "aspect_ratio", "aspect_ratio_error",
    "energy", "energy_error", "gain_isotropic", "gain_isotropic_error", "gain_mass", "gain_mass_error",
    "stiffness", "stiffness_error", "isotropic_stiffness", "isotropic_stiffness_error", "response",
    "response_error", "interior", "shape_verdict",
}  # fmt: skip
CURVE_KEYS = {"stretch", "angle_degrees", "energy", "energy_error", "difference_error"}
RESULTS = Path("run_results")


def test_sample_gives_one_json_object_and_keeps_it(mcgeo: Command, small: Path) -> None:
    answer = mcgeo("sample", "run.yaml", "--json")
    assert answer.code == 0
    found = json.loads(answer.out)
    assert found.keys() >= SAMPLE_KEYS
    assert found["state"].keys() >= STATE_KEYS
    assert found["diagnostics"].keys() >= DIAGNOSTICS_KEYS
    assert found["state"]["filling"] == "1/3" and found["state"]["statistics"] == "fermions"
    assert found["complete"] is True and found["diagnostics"]["verdict"] == "converged"
    for name in ("energy_torus", "energy_plane"):
        assert found[name].keys() == {"value", "error"}
        assert -0.5 < found[name]["value"] < -0.3 and 0.0 < found[name]["error"] < 0.01
    assert found["occupations"][0] == {"m": 1, "value": 0.0, "error": 0.0}
    assert [n["m"] for n in found["occupations"][:3]] == [1, 3, 5]
    assert found["seconds"] > 0.0
    # Two proposals per electron and sweep.
    moves = 8 * 480 * 4 * 2
    assert found["moves_per_second"] == pytest.approx(moves / found["seconds"])
    assert json.loads((RESULTS / "sample.json").read_text()) == found


def test_scan_gives_one_json_object_and_keeps_it(mcgeo: Command, small: Path) -> None:
    answer = mcgeo("scan", "run.yaml", "--json")
    assert answer.code == 0
    found = json.loads(answer.out)
    assert found.keys() >= {"state", "problem", "optimum", "curve", "diagnostics"}
    assert found["state"].keys() >= STATE_KEYS
    assert found["problem"].keys() >= PROBLEM_KEYS
    assert found["optimum"].keys() >= OPTIMUM_KEYS
    assert found["diagnostics"].keys() >= DIAGNOSTICS_KEYS
    assert all(point.keys() == CURVE_KEYS for point in found["curve"])
    assert [point["stretch"] for point in found["curve"]] == pytest.approx([0.0, 0.1, 0.2, 0.3, 0.4, 0.5])
    # Mass and hole have one axis, and the curve runs along it; m1/m2 = e^(2 Q_m).
    assert found["problem"]["mass_stretch"] == pytest.approx(0.5 * math.log(2.0))
    assert found["optimum"]["angle_degrees"] == pytest.approx(20.0, abs=1e-6)
    assert [point["angle_degrees"] for point in found["curve"]] == pytest.approx([20.0] * 6, abs=1e-6)
    assert 0.0 < found["optimum"]["stretch"] < found["problem"]["mass_stretch"]
    assert found["optimum"]["aspect_ratio"] == pytest.approx(math.exp(found["optimum"]["stretch"]))
    assert min(point["energy"] for point in found["curve"]) >= found["optimum"]["energy"]
    assert json.loads((RESULTS / "scan.json").read_text()) == found
    table = (RESULTS / "curve.csv").read_text().splitlines()
    rows = [line for line in table if not line.startswith("#")]
    assert len(rows) == 7
    assert float(rows[3].split(",")[1]) == found["curve"][2]["energy"]


def test_angle_without_meaning_is_null(mcgeo: Command, small: Path) -> None:
    small.write_text(SMALL.replace("ratio: 2.0", "ratio: 1.0"))
    optimum = json.loads(mcgeo("scan", "run.yaml", "--json").out)["optimum"]
    assert optimum["stretch"] == 0.0 and optimum["angle_error"] is None


def test_results_and_progress_are_kept_apart(mcgeo: Command, small: Path) -> None:
    answer = mcgeo("sample", "run.yaml")
    assert "energy, infinite liquid" in answer.out and "converged" in answer.out
    assert "equilibrating" in answer.err and "block 8/8" in answer.err
    assert "block" not in answer.out and "energy" not in answer.err
    assert mcgeo("sample", "run.yaml", "--out", "other", "--quiet").err == ""


def test_short_run_is_said_not_to_have_converged(mcgeo: Command, small: Path) -> None:
    small.write_text(SMALL.replace("sweeps: 480", "sweeps: 8"))
    answer = mcgeo("sample", "run.yaml", "--json")
    assert answer.code == 3
    found = json.loads(answer.out)["diagnostics"]
    assert found["verdict"] == "short" and found["reasons"] and found["sweeps_to_add"] > 0
    text = mcgeo("scan", "run.yaml")
    assert text.code == 3 and f"mcgeo sample CONFIG --extend {found['sweeps_to_add']}" in text.out


def test_same_command_again_takes_the_file(mcgeo: Command, small: Path) -> None:
    first = mcgeo("sample", "run.yaml", "--json")
    content = (RESULTS / "liquid.h5").read_bytes()
    again = mcgeo("sample", "run.yaml", "--json")
    assert again.out == first.out and again.code == 0
    assert "holds this liquid already" in again.err and "equilibrating" not in again.err
    assert (RESULTS / "liquid.h5").read_bytes() == content


def test_problem_and_threads_may_change(mcgeo: Command, small: Path) -> None:
    mcgeo("scan", "run.yaml")
    content = (RESULTS / "liquid.h5").read_bytes()
    small.write_text(SMALL.replace("ratio: 2.0", "ratio: 3.0").replace("threads: 1", "threads: 2"))
    answer = mcgeo("scan", "run.yaml", "--json", "--threads", "1")
    assert answer.code == 0
    assert json.loads(answer.out)["problem"]["mass_stretch"] == pytest.approx(0.5 * math.log(3.0))
    assert (RESULTS / "liquid.h5").read_bytes() == content


def test_results_do_not_depend_on_threads(mcgeo: Command, small: Path) -> None:
    small.write_text(SMALL.replace("walkers: 8", "walkers: 20"))
    command = ("sample", "run.yaml", "--json", "--threads")
    one, two = (json.loads(mcgeo(*command, n, "--out", f"on_{n}").out) for n in "12")
    for name in ("energy_torus", "energy_plane", "occupations", "acceptance", "diagnostics"):
        assert one[name] == two[name]


@pytest.mark.parametrize(
    ("old", "new", "difference"),
    [
        ("sweeps: 480", "sweeps: 800", "sampling.sweeps: 480 and 800"),
        ("seed: 5", "seed: 6", "sampling.seed: 5 and 6"),
        ("electrons: 4", "electrons: 5", "state.electrons: 4 and 5"),
    ],
)
def test_another_liquid_is_not_overwritten(
    mcgeo: Command, small: Path, old: str, new: str, difference: str
) -> None:
    mcgeo("sample", "run.yaml")
    content = (RESULTS / "liquid.h5").read_bytes()
    small.write_text(SMALL.replace(old, new))
    refused = mcgeo("sample", "run.yaml")
    assert refused.code == 2 and refused.out == ""
    assert difference in refused.err and "--overwrite" in refused.err and "--out" in refused.err
    assert (RESULTS / "liquid.h5").read_bytes() == content
    replaced = mcgeo("sample", "run.yaml", "--overwrite")
    assert replaced.code == 0
    assert (RESULTS / "liquid.h5").read_bytes() != content


def test_seed_left_open_is_drawn_once(mcgeo: Command, small: Path) -> None:
    small.write_text(SMALL.replace("seed: 5", "seed: null"))
    first, again = (json.loads(mcgeo("sample", "run.yaml", "--json").out) for _ in range(2))
    assert first["seed"] == again["seed"] > 0
    other = json.loads(mcgeo("sample", "run.yaml", "--json", "--out", "other").out)
    assert other["seed"] != first["seed"]


def test_scan_works_from_the_result_file_alone(mcgeo: Command, small: Path) -> None:
    first = mcgeo("scan", "run.yaml", "--json")
    Path("elsewhere").mkdir()
    shutil.move(RESULTS / "liquid.h5", "elsewhere/sampled.h5")
    shutil.rmtree(RESULTS)
    small.unlink()
    alone = mcgeo("scan", "elsewhere/sampled.h5", "--json")
    assert alone.code == 0 and alone.out == first.out and alone.err == ""
    names = sorted(path.name for path in Path("elsewhere").iterdir())
    assert names == ["curve.csv", "sampled.h5", "scan.json"]


def test_scan_of_another_problem_with_a_given_liquid(mcgeo: Command, small: Path) -> None:
    mcgeo("sample", "run.yaml")
    other = SMALL.replace("ratio: 2.0", "ratio: 5.0").replace("sweeps: 480", "sweeps: 960")
    Path("other.yaml").write_text(other)
    answer = mcgeo("scan", "other.yaml", "--liquid", "run_results/liquid.h5", "--json")
    found = json.loads(answer.out)
    assert found["problem"]["mass"]["ratio"] == 5.0
    assert found["state"]["electrons"] == 4
    assert not Path("other_results/liquid.h5").exists()
    Path("third.yaml").write_text(other.replace("exponent: 3", "exponent: 5"))
    refused = mcgeo("scan", "third.yaml", "--liquid", "run_results")
    assert refused.code == 2 and refused.out == ""
    assert "state.exponent: 3 and 5" in refused.err
    assert not Path("third_results").exists()


def test_metrics_out_of_reach_are_refused_before_sampling(mcgeo: Command, small: Path) -> None:
    Path("far.yaml").write_text(SMALL.replace("ratio: 2.0", "ratio: 20000.0"))
    for command in ("check", "scan"):
        answer = mcgeo(command, "far.yaml")
        assert answer.code == 2 and "problem.mass" in answer.err and "4 works" in answer.err
    assert not Path("far_results").exists()


@pytest.mark.parametrize("path", sorted((ROOT / "configs").glob("*.yaml")), ids=lambda path: path.name)
def test_configurations_that_come_with_the_program_are_valid(mcgeo: Command, path: Path) -> None:
    answer = mcgeo("check", str(path), "--json")
    assert answer.code == 0 and answer.err == ""
    plan = json.loads(answer.out)
    assert plan.get("electrons", plan.get("points")) > 1
    # A liquid of the catalogue costs a few hundredths of a second.
    assert plan["estimated_seconds"] > 0.0 or "catalogue" in plan
    assert list(Path().iterdir()) == []


def test_schema_and_info(mcgeo: Command) -> None:
    schema = json.loads(mcgeo("schema").out)
    assert schema["properties"].keys() >= {"state", "cell", "sampling", "problem", "scan"}
    info = json.loads(mcgeo("info", "--json").out)
    assert info.keys() >= {"mcgeo", "python", "system", "threads", "libraries"}


@pytest.mark.parametrize("arguments", [["--help"], ["scan", "--help"], ["--version"]])
def test_help_imports_no_numerical_library(arguments: list[str], tmp_path: Path) -> None:
    code = (
        "import sys\n"
        "from mcgeo.cli import main\n"
        "try:\n"
        f"    main({arguments})\n"
        "except SystemExit as stop:\n"
        "    heavy = {'numba', 'numpy', 'scipy', 'h5py', 'matplotlib', 'pydantic'} & set(sys.modules)\n"
        "    print(stop.code, sorted(heavy), file=sys.stderr)\n"
    )
    out, err = python_process(tmp_path, "-c", code).communicate(timeout=60)
    assert err == "0 []\n"
    assert "mcgeo" in out


def test_units_of_a_sample_reach_the_results(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """GaAs at 10 T: l_B = 25.6556418 nm/sqrt(10), Coulomb energy 4.35090 meV sqrt(10) (CODATA 2022 constants)."""
    config = tmp_path / "well.yaml"
    config.write_text(
        "state: {kind: laughlin, exponent: 3, electrons: 8}\n"
        "sampling: {walkers: 8, sweeps: 400, blocks: 4, seed: 5, threads: 1}\n"
        "material: {name: GaAs, field_tesla: 10.0}\n"
    )
    assert main(["scan", str(config), "--out", str(tmp_path / "out"), "--json", "-q"]) in (0, 3)
    found = json.loads(capsys.readouterr().out)
    units, best = found["units"], found["optimum"]
    assert units["magnetic_length_nm"] == pytest.approx(25.6556418 / math.sqrt(10.0), rel=1e-8)
    assert units["coulomb_energy_mev"] == pytest.approx(4.35090 * math.sqrt(10.0), rel=2e-6)
    assert units["density_per_cm2"] == pytest.approx(2.41798924e10 * 10.0 / 3.0, rel=1e-8)
    assert best["energy_mev"] == pytest.approx(best["energy"] * units["coulomb_energy_mev"], rel=1e-12)
    per_area = units["coulomb_energy_mev"] * units["density_per_cm2"] * 1e-14
    assert best["stiffness_mev_per_nm2"][0][0] == pytest.approx(best["stiffness"][0][0] * per_area, rel=1e-8)


def test_result_file_says_what_it_came_from(mcgeo: Command, small: Path) -> None:
    mcgeo("sample", "run.yaml")
    info = json.loads(mcgeo("info", "--json").out)
    with h5py.File(RESULTS / "liquid.h5") as file:
        found = dict(file.attrs)
        config = json.loads(file["config"][()])
    assert found["mcgeo_version"] == info["mcgeo"]
    libraries = json.loads(found["libraries"])
    assert libraries == {name: info["libraries"][name] for name in libraries} and "numba" in libraries
    processor = json.loads(found["processor"])
    assert processor["name"] == info["processor"] and set(processor["features"]) <= {
        "fma", "avx", "avx2", "avx512f", "neon", "sve",
    }  # fmt: skip
    assert config["state"]["electrons"] == 4 and config["sampling"]["seed"] == 5
