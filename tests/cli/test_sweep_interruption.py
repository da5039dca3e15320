"""Sweeps that are stopped or killed go on where they were and end with the bits of an undisturbed one."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import Any

import pytest

from mcgeo.cli import main
from mcgeo.runs.build import available_threads
from tests.cli.conftest import ROOT

SWEEP = """\
state: {kind: laughlin, exponent: 3, electrons: 4}
sampling: {walkers: 8, sweeps: 60000, equilibration: 100, blocks: 32, seed: 5, checkpoint_seconds: 0}
sweep:
  axes:
    - {key: problem.mass.ratio, values: [1, 2, 4]}
    - together: [{key: state.exponent, values: [3, 5]}, {key: state.electrons, values: [4, 3]}]
"""
PATIENCE = 120.0


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory: pytest.TempPathFactory) -> tuple[bytes, bytes]:
    """Tables of the sweep done in one go in this process."""
    folder = tmp_path_factory.mktemp("undisturbed")
    (folder / "run.yaml").write_text(SWEEP)
    run_to_the_end(folder)
    return tables(folder)


def run_to_the_end(folder: Path) -> None:
    command = ["sweep", str(folder / "run.yaml"), "--out", str(folder / "run_sweep"), "--workers", "1", "--quiet"]
    assert main(command) in (0, 3)


def tables(folder: Path) -> tuple[bytes, bytes]:
    return tuple((folder / "run_sweep" / name).read_bytes() for name in ("sweep.csv", "sweep.h5"))  # type: ignore


def wait_until(condition: Callable[[], bool], what: str) -> None:
    end = time.monotonic() + PATIENCE
    while not condition():
        assert time.monotonic() < end, f"waited in vain for {what}"
        time.sleep(0.01)


@contextmanager
def sweeping(folder: Path, workers: int) -> Iterator[subprocess.Popen[str]]:
    """The command in a process group of its own, which is gone afterwards."""
    (folder / "run.yaml").write_text(SWEEP)
    environment = {**os.environ, "PYTHONPATH": os.fspath(ROOT), "OMP_NUM_THREADS": "1"}
    process = subprocess.Popen(
        [sys.executable, "-m", "mcgeo", "sweep", "run.yaml", "--workers", str(workers)], cwd=folder, text=True,
        env=environment, stdout=subprocess.PIPE, stderr=subprocess.PIPE, start_new_session=True,
    )  # fmt: skip
    try:
        yield process
    finally:
        with suppress(ProcessLookupError):
            os.killpg(process.pid, signal.SIGKILL)
        process.communicate()


def in_mid_sampling(folder: Path) -> Callable[[], bool]:
    """A liquid has blocks on disk and is still being sampled."""
    return lambda: any(
        (place / "liquid.h5").exists() and (place / ".liquid.h5.lock").exists()
        for place in folder.glob("run_sweep/liquids/*")
    )


def workers_of(process: subprocess.Popen[str]) -> list[int]:
    found = []
    for child in Path(f"/proc/{process.pid}/task/{process.pid}/children").read_text().split():
        with suppress(OSError):
            if b"spawn_main" in Path(f"/proc/{child}/cmdline").read_bytes():
                found.append(int(child))
    return found


def is_alive(process: int) -> bool:
    """Not gone, and not dead with nobody to ask how it ended."""
    try:
        return Path(f"/proc/{process}/stat").read_text().rpartition(")")[2].split()[0] not in "ZX"
    except OSError:
        return False


@pytest.mark.parametrize(
    ("number", "code", "workers"),
    [pytest.param(signal.SIGINT, 130, 1, marks=pytest.mark.long), (signal.SIGTERM, 143, 2)],
    ids=["one", "two"],
)
def test_a_stopped_sweep_goes_on(
    tmp_path: Path, undisturbed: tuple[bytes, bytes], number: signal.Signals, code: int, workers: int
) -> None:
    with sweeping(tmp_path, workers) as process:
        wait_until(in_mid_sampling(tmp_path), "a sampling")
        process.send_signal(number)
        out, err = process.communicate(timeout=PATIENCE)
        assert process.returncode == code, err
    assert out == "" and "the same command goes on from there" in err and "Traceback" not in err
    # Nobody is left at work, and what is there tells how far it came.
    assert not list(tmp_path.glob("run_sweep/liquids/*/.liquid.h5.lock"))
    assert not (tmp_path / "run_sweep/.stop").exists()
    assert not (tmp_path / "run_sweep/sweep.csv").exists()
    run_to_the_end(tmp_path)
    assert tables(tmp_path) == undisturbed


@pytest.mark.long
def test_killed_with_all_its_workers_a_sweep_goes_on(tmp_path: Path, undisturbed: tuple[bytes, bytes]) -> None:
    with sweeping(tmp_path, 2) as process:
        wait_until(in_mid_sampling(tmp_path), "a sampling")
        os.killpg(process.pid, signal.SIGKILL)
        process.wait(timeout=PATIENCE)
    run_to_the_end(tmp_path)
    assert tables(tmp_path) == undisturbed


def test_a_killed_worker_costs_nothing_but_time(tmp_path: Path, undisturbed: tuple[bytes, bytes]) -> None:
    with sweeping(tmp_path, 2) as process:
        wait_until(in_mid_sampling(tmp_path), "a sampling")
        victims = workers_of(process)
        os.kill(victims[0], signal.SIGKILL)
        out, err = process.communicate(timeout=PATIENCE)
        assert process.returncode in (0, 3), err
    assert "point 6/6" in err and "failed" not in out
    assert tables(tmp_path) == undisturbed


def test_workers_do_not_outlive_a_killed_parent(
    tmp_path: Path, undisturbed: tuple[bytes, bytes], capsys: pytest.CaptureFixture[str]
) -> None:
    with sweeping(tmp_path, 2) as process:
        wait_until(in_mid_sampling(tmp_path), "a sampling")
        # The status can be read while it runs.
        found = status(tmp_path, capsys)
        assert (found["points"], found["threads"]) == (6, max(2, available_threads()))
        workers = workers_of(process)
        assert workers
        process.kill()
        process.wait(timeout=PATIENCE)
        wait_until(lambda: not any(map(is_alive, workers)), "the workers' end")
    found = status(tmp_path, capsys)
    assert sum(liquid["blocks_done"] for liquid in found["liquids"]) > 0
    assert all(liquid["blocks"] == 32 for liquid in found["liquids"])
    assert found["left"] + found["done"] == 6 and found["estimated_seconds_left"] >= 0.0
    run_to_the_end(tmp_path)
    assert tables(tmp_path) == undisturbed


def status(folder: Path, capsys: pytest.CaptureFixture[str]) -> dict[str, Any]:
    capsys.readouterr()
    assert main(["sweep", str(folder / "run_sweep"), "--status", "--json"]) == 0
    found: dict[str, Any] = json.loads(capsys.readouterr().out)
    return found
