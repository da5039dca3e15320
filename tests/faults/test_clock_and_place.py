"""Clocks that jump and folders that move: times never run backwards, and a file says nothing about where it lies."""

from __future__ import annotations

import os
import time
from pathlib import Path

import h5py
import pytest

from mcgeo.cli import main
from mcgeo.runs.storage import read_result
from tests.cli.conftest import SMALL


def test_clock_that_jumps_back(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    now = [2e9]

    def earlier_and_earlier() -> float:
        now[0] -= 3600.0
        return now[0]

    monkeypatch.chdir(tmp_path)
    Path("run.yaml").write_text(SMALL)
    monkeypatch.setattr(time, "time", earlier_and_earlier)
    monkeypatch.setattr(time, "time_ns", lambda: int(1e9 * earlier_and_earlier()))
    assert main(["sample", "run.yaml", "--out", "out", "-q"]) == 0
    assert 0.0 < read_result(Path("out/liquid.h5")).seconds < 600.0


@pytest.mark.parametrize("moment", [0.0, 4e9])
def test_file_of_another_time_in_a_folder_that_moved(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], liquid: bytes, moment: float
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("run.yaml").write_text(SMALL)
    Path("first").mkdir()
    Path("first/liquid.h5").write_bytes(liquid)
    assert main(["scan", "first", "--json", "-q"]) == 0
    answer = capsys.readouterr().out
    os.utime("first/liquid.h5", (moment, moment))
    Path("first").rename("naïve name with spaces")
    assert main(["scan", "naïve name with spaces/liquid.h5", "--json", "-q"]) == 0
    assert capsys.readouterr().out == answer
    assert main(["sample", "run.yaml", "--out", "naïve name with spaces", "--json"]) == 0
    assert "holds this liquid already" in capsys.readouterr().err


def test_file_names_neither_folder_nor_moment(liquid: bytes, tmp_path: Path) -> None:
    path = tmp_path / "liquid.h5"
    path.write_bytes(liquid)
    with h5py.File(path) as file:
        assert set(file.attrs) >= {"format", "mcgeo_version", "libraries", "seconds", "complete"}
    for word in (os.fspath(tmp_path.parent), os.fspath(Path.home()), time.strftime("%Y-%m-%d")):
        assert word.encode() not in liquid
