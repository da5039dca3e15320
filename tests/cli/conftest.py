"""Small configurations and the ways to run a command on them."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np
import pytest

from mcgeo.cli import main
from mcgeo.runs import production
from mcgeo.sampling.blocks import Interrupted

ROOT = Path(__file__).parents[2]

# Enough for 400 independent energies, and done in a moment.
SMALL = """\
state:
  kind: laughlin
  exponent: 3
  electrons: 4
sampling:
  walkers: 8
  sweeps: 480
  equilibration: 100
  blocks: 8
  seed: 5
  threads: 1
problem:
  mass: {ratio: 2.0, angle_degrees: 20.0}
scan:
  stretch: {from: 0.0, to: 0.5, points: 6}
"""


def interrupted_after(monkeypatch: pytest.MonkeyPatch, n_blocks: int) -> None:
    """Have the run stopped, as by a signal, when this many more blocks are done."""
    advance, left = production.next_block, [n_blocks]

    def next_block(*arguments):
        if left[0] == 0:
            raise Interrupted
        left[0] -= 1
        return advance(*arguments)

    monkeypatch.setattr(production, "next_block", next_block)


class Answer:
    """What a command gave back."""

    def __init__(self, code: int, out: str, err: str) -> None:
        self.code, self.out, self.err = code, out, err


@pytest.fixture
def mcgeo(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Callable:
    """``mcgeo("sample", "run.yaml")`` in an empty current folder, in this process."""
    monkeypatch.chdir(tmp_path)

    def run(*arguments: str) -> Answer:
        capsys.readouterr()
        try:
            code = main(list(arguments))
        except SystemExit as stop:
            code = int(stop.code or 0)
        captured = capsys.readouterr()
        return Answer(code, captured.out, captured.err)

    return run


@pytest.fixture
def small(tmp_path: Path) -> Path:
    """``run.yaml`` in the current folder of the other fixtures."""
    path = tmp_path / "run.yaml"
    path.write_text(SMALL)
    return path


def python_process(folder: Path, *arguments: str, stdin: int | None = None) -> subprocess.Popen[str]:
    """A Python with the package on its path and pipes for its output, run in ``folder``."""
    environment = {**os.environ, "PYTHONPATH": os.fspath(ROOT), "OMP_NUM_THREADS": "1"}
    return subprocess.Popen(
        [sys.executable, *arguments], cwd=folder, env=environment, text=True,
        stdin=stdin, stdout=subprocess.PIPE, stderr=subprocess.PIPE,
    )  # fmt: skip


def contents(path: Path) -> dict[str, bytes]:
    """Every dataset of a file to the last bit, and every attribute but the time it took."""
    found: dict[str, bytes] = {}

    def note(name: str, item: h5py.Group | h5py.Dataset) -> None:
        if isinstance(item, h5py.Dataset):
            found[name] = np.asarray(item[()]).tobytes()
        for key, value in item.attrs.items():
            if key not in {"seconds", "REFERENCE_LIST", "DIMENSION_LIST"}:
                found[f"{name}@{key}"] = repr(value).encode()

    with h5py.File(path) as file:
        file.visititems(note)
        note("", file)
    return found
