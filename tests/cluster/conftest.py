"""A small sweep, and what one process makes of it."""

from __future__ import annotations

import io
from pathlib import Path

import h5py
import pytest

from mcgeo.cli import main

SWEEP = """\
state: {kind: laughlin, exponent: 3, electrons: 4}
sampling: {walkers: 16, sweeps: 320, equilibration: 40, blocks: 8, seed: 3, checkpoint_seconds: 0}
sweep:
  axes:
    - {key: sampling.seed, values: [3, 4]}
    - {key: problem.mass.ratio, from: 1.5, to: 3, points: 3}
"""
TABLES = ("sweep.csv", "sweep.h5")


@pytest.fixture(scope="session")
def serial(tmp_path_factory: pytest.TempPathFactory) -> dict[str, bytes]:
    """Tables of the sweep, made by one process."""
    folder = tmp_path_factory.mktemp("serial")
    (folder / "run.yaml").write_text(SWEEP)
    assert main(["sweep", str(folder / "run.yaml"), "--out", str(folder / "out"), "--workers", "1", "-q"]) in (0, 3)
    return tables(folder / "out")


def tables(folder: Path) -> dict[str, bytes]:
    """Content of the tables in a sweep's folder."""
    return {name: (folder / name).read_bytes() for name in TABLES}


def numbers(found: dict[str, bytes]) -> tuple[bytes, dict[str, str]]:
    """All of the tables but the configuration, which says into how many parts."""
    with h5py.File(io.BytesIO(found["sweep.h5"])) as file:
        return found["sweep.csv"], {name: repr(file[name][()].tolist()) for name in file}


@pytest.fixture
def swept(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A current folder with the sweep in ``run.yaml``."""
    (tmp_path / "run.yaml").write_text(SWEEP)
    monkeypatch.chdir(tmp_path)
    return tmp_path
