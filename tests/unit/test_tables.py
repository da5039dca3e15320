"""Tables, JSON and numbers with errors."""

import csv
import json
import math
import os
import socket
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from mcgeo.estimate.statistics import Estimate
from mcgeo.report.numbers import degrees_with_error, value_with_error
from mcgeo.report.tables import json_ready, map_table, write_csv, write_json
from mcgeo.runs.atomic import write_whole


@pytest.mark.parametrize(
    ("value", "error", "words"),
    [
        (1.7234, 0.0041, "1.723(4)"),
        (1.7234, 0.0141, "1.723(14)"),
        (-0.40976, 8e-5, "-0.40976(8)"),
        (0.123, 0.096, "0.12(10)"),
        (13.12, 1.44, "13.1(1.4)"),
        (1312.0, 37.0, "1312(37)"),
        (0.5, 0.0, "0.5"),
        (-1e-17, 1e-16, "0"),
        (-0.001, 0.02, "0.00(2)"),
        (0.5123, math.inf, "0.512(?)"),
        (0.5123, math.nan, "0.512(?)"),
    ],
)
def test_value_with_error(value, error, words):
    assert value_with_error(Estimate(value, error)) == words


def test_degrees():
    assert degrees_with_error(Estimate(math.radians(-17.23), math.radians(0.3))) == "-17.2(3)°"
    assert degrees_with_error(Estimate(math.pi / 2, 0.0)) == "90°"


def test_csv_reads_back_to_the_same_numbers(tmp_path):
    columns = {
        "Q, stretch": np.array([0.1, 1.0 / 3.0, 1e-300]),
        "n": np.array([1, 2, 3]),
        "fit": np.array([math.pi, math.nan]),
    }
    path = tmp_path / "table.csv"
    write_csv(path, columns, "seed 7\nversion 0.1.0")
    lines = path.read_text().splitlines()
    assert lines[:2] == ["# seed 7", "# version 0.1.0"]
    heading, *rows = csv.reader(lines[2:])
    assert heading == list(columns)
    np.testing.assert_array_equal([float(row[0]) for row in rows], columns["Q, stretch"])
    assert [row[1] for row in rows] == ["1", "2", "3"]
    assert [row[2] for row in rows] == [repr(math.pi), "nan", ""]


def test_map_table_refuses_a_transposed_map():
    with pytest.raises(ValueError, match=r"\(2, 3\)"):
        map_table(np.arange(3), np.arange(2), np.zeros((3, 2)), ("x", "y", "g"))


def test_json(tmp_path):
    obj = {"a": np.float64(0.1), "b": [math.nan, -math.inf, 1], 3: np.arange(2), "flag": np.bool_(True), "none": None}
    path = tmp_path / "new" / "summary.json"
    write_json(path, obj)
    assert json.loads(path.read_text()) == {"a": 0.1, "b": [None, None, 1], "3": [0, 1], "flag": True, "none": None}
    assert json_ready(Path("a") / "b") == str(Path("a") / "b")
    with pytest.raises(TypeError, match="set"):
        write_json(path, {"a": {1}})


def test_failed_write_keeps_the_old_file_and_leaves_no_part(tmp_path, monkeypatch):
    path = tmp_path / "table.csv"
    path.write_bytes(b"old")

    def refuse(*_):
        raise OSError("disk full")

    monkeypatch.setattr(os, "replace", refuse)
    with pytest.raises(OSError, match="disk full"):
        write_whole(path, b"new")
    assert path.read_bytes() == b"old"
    assert [entry.name for entry in tmp_path.iterdir()] == ["table.csv"]


def test_parts_of_dead_writers_are_removed_and_those_of_live_ones_left(tmp_path):
    here, ended = socket.gethostname(), subprocess.Popen([sys.executable, "-c", ""])
    ended.wait()
    kept = [f".table.csv.{here}.{os.getpid()}.0a.part", f".table.csv.elsewhere.{ended.pid}.0a.part", f".other.{here}"]
    for name in [*kept, f".table.csv.{here}.{ended.pid}.0a.part"]:
        (tmp_path / name).write_bytes(b"half")
    write_whole(tmp_path / "table.csv", b"new")
    assert sorted(path.name for path in tmp_path.iterdir()) == sorted(["table.csv", *kept])
