"""What the commands refuse: with exit code 2, a plain line for each fault and nothing written."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import h5py
import pytest

from tests.cli.conftest import SMALL, Answer

Command = Callable[..., Answer]

RESULTS = Path("run_results")


@pytest.mark.parametrize("command", ["sample", "scan", "check"])
def test_faults_of_a_configuration_have_their_places(mcgeo: Command, small: Path, command: str) -> None:
    faulty = SMALL.replace("exponent: 3", "exponent: 2.5").replace("walkers: 8", "walker: 8")
    small.write_text(faulty.replace("2.0", "-1.0"))
    answer = mcgeo(command, "run.yaml")
    assert answer.code == 2 and answer.out == ""
    lines = answer.err.splitlines()
    assert [line.split(": ")[:2] for line in lines] == [
        ["run.yaml:3:13", "state.exponent"],
        ["run.yaml:6:3", "sampling.walker"],
        ["run.yaml:13:17", "problem.mass.ratio"],
    ]
    assert "did you mean 'walkers'?" in lines[1]
    assert sorted(path.name for path in Path().iterdir()) == ["run.yaml"]


@pytest.mark.parametrize("text", ["state: [1, 2\n", "state: {kind: laughlin}\n\tsampling: 1\n", ""])
def test_what_is_no_yaml_has_its_place(mcgeo: Command, small: Path, text: str) -> None:
    small.write_text(text)
    answer = mcgeo("sample", "run.yaml")
    assert answer.code == 2 and answer.out == ""
    (line,) = answer.err.splitlines()
    file, row, column, message = line.split(":", 3)
    assert file == "run.yaml" and row.isdigit() and column.isdigit() and message.strip()
    assert not RESULTS.exists()


def test_cell_out_of_range_is_refused(mcgeo: Command, small: Path) -> None:
    small.write_text(SMALL + "cell: {tau: [0.0, 90.0]}\n")
    answer = mcgeo("sample", "run.yaml")
    assert answer.code == 2 and len(answer.err.splitlines()) == 1
    assert "at most 28 works" in answer.err
    assert not RESULTS.exists()


@pytest.mark.parametrize("name", ["missing.h5", "missing.yaml"])
def test_missing_file(mcgeo: Command, name: str) -> None:
    answer = mcgeo("scan", name)
    assert answer.code == 2 and answer.out == ""
    assert len(answer.err.splitlines()) == 1 and name in answer.err


def cut_off(path: Path) -> None:
    path.write_bytes(path.read_bytes()[:5000])


def garbage(path: Path) -> None:
    path.write_bytes(bytes(range(256)) * 20)


def another_kind(path: Path) -> None:
    with h5py.File(path, "w") as file:
        file["numbers"] = [1.0, 2.0]


def without_blocks(path: Path) -> None:
    with h5py.File(path, "r+") as file:
        del file["blocks"]


@pytest.mark.parametrize("damage", [cut_off, garbage, another_kind, without_blocks])
@pytest.mark.parametrize("arguments", [("scan", "run_results/liquid.h5"), ("sample", "run.yaml")])
def test_damaged_result_file(
    mcgeo: Command, small: Path, damage: Callable[[Path], None], arguments: tuple[str, ...]
) -> None:
    assert mcgeo("sample", "run.yaml").code == 0
    damage(RESULTS / "liquid.h5")
    content = (RESULTS / "liquid.h5").read_bytes()
    answer = mcgeo(*arguments)
    assert answer.code == 2 and answer.out == ""
    assert len(answer.err.splitlines()) == 1
    assert "liquid.h5: " in answer.err and "result file" in answer.err
    assert (RESULTS / "liquid.h5").read_bytes() == content


def test_folder_that_cannot_be_written(mcgeo: Command, small: Path) -> None:
    Path("taken").write_text("a file")
    answer = mcgeo("sample", "run.yaml", "--out", "taken", "--quiet")
    assert answer.code == 2 and answer.out == ""
    assert len(answer.err.splitlines()) == 1 and "cannot be written" in answer.err


@pytest.mark.parametrize(
    "arguments", [(), ("divine",), ("sample",), ("sample", "run.yaml", "--threads", "0"), ("scan", "--bold")]
)
def test_wrong_usage(mcgeo: Command, arguments: tuple[str, ...]) -> None:
    answer = mcgeo(*arguments)
    assert answer.code == 2 and answer.out == "" and "usage: mcgeo" in answer.err
