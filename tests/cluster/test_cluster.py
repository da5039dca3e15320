"""Sweeps on workers of a scheduler: the bits of one process, whatever befalls workers and scheduler."""

from __future__ import annotations

import os
import signal
import sys
from pathlib import Path

import dask
import pytest

from mcgeo.cli import main
from mcgeo.runs import cluster as cluster_module
from mcgeo.runs.cluster_worker import unfit, versions
from mcgeo.runs.lock import run_lock
from mcgeo.runs.sweep_liquids import LIQUIDS, liquid_progress
from tests.cluster.conftest import SWEEP, numbers, tables
from tests.cluster.loopback import Loopback, loopback, meanwhile, wait_for


def sweep(cluster: Loopback, *options: str) -> int:
    return main(["sweep", "run.yaml", "--out", "out", "--scheduler", str(cluster.file), *options])


def begun_liquid(folder: Path) -> Path:
    """Folder of the one liquid that has been begun and not ended."""
    begun = [
        path
        for path in (folder / LIQUIDS).iterdir()
        if liquid_progress(folder, path.name).blocks > 0 and not liquid_progress(folder, path.name).complete
    ]
    assert len(begun) == 1
    return begun[0]


def test_two_workers_give_the_bits_of_one_process(
    swept: Path, serial: dict[str, bytes], monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    with loopback(swept / "cluster", workers=1) as cluster:
        # Tasks of one process beside each other, in threads.
        cluster.worker(threads=2)
        wait_for(lambda: cluster.logs().count("Registered to") == 2, "both workers")
        # Other versions here than on the workers: refused before anything is done.
        with monkeypatch.context() as other:
            other.setattr(cluster_module, "versions", lambda: {**versions(), "numba": "0.1"})
            assert sweep(cluster) == 2
        said = capsys.readouterr().err
        assert said.count(f"numba {versions()['numba']} instead of 0.1") == 2
        assert not (swept / "out/points").exists()
        assert sweep(cluster) in (0, 3)
        # And with the walkers of every liquid divided.
        (swept / "run.yaml").write_text(SWEEP + f"  walker_parts: 2\n  scheduler: {cluster.address}\n")
        assert main(["sweep", "run.yaml", "--out", "parts"]) in (0, 3)
    assert numbers(tables(swept / "parts")) == numbers(serial)
    assert tables(swept / "out") == serial
    assert not [path for path in (swept / "out").iterdir() if path.name.startswith(".")]


def test_a_killed_worker_costs_nothing_but_time_and_a_late_one_does_its_work(
    swept: Path, serial: dict[str, bytes]
) -> None:
    with loopback(swept / "cluster") as cluster:
        first = cluster.worker(halts=True)

        def kill_and_replace() -> None:
            wait_for(lambda: cluster.halted, "the halt in the fourth block")
            begun_liquid(swept / "out")
            first.send_signal(signal.SIGKILL)
            first.wait()
            cluster.worker()

        with meanwhile(kill_and_replace):
            assert sweep(cluster) in (0, 3)
    assert tables(swept / "out") == serial


def test_after_the_loss_of_the_scheduler_the_same_command_goes_on(
    swept: Path, serial: dict[str, bytes], capsys: pytest.CaptureFixture[str]
) -> None:
    with loopback(swept / "cluster") as cluster:
        worker = cluster.worker(halts=True)

        def kill() -> None:
            wait_for(lambda: cluster.halted, "the halt in the fourth block")
            dask.config.set({"distributed.comm.timeouts.connect": "2s"})
            cluster.scheduler.send_signal(signal.SIGKILL)

        with dask.config.set({"distributed.comm.timeouts.connect": "60s"}), meanwhile(kill):
            assert sweep(cluster, "-q") == 4
        assert "has gone; what is done is in out: start a scheduler and workers" in capsys.readouterr().err
        # Its worker ends by itself, with its whole blocks saved.
        wait_for(lambda: worker.poll() is not None, "the end of the worker")
        with run_lock(begun_liquid(swept / "out") / "liquid.h5"):
            pass
    with loopback(swept / "another", workers=1) as cluster:
        assert sweep(cluster) in (0, 3)
    assert tables(swept / "out") == serial


def test_ctrl_c_reaches_the_workers(swept: Path, serial: dict[str, bytes], capsys: pytest.CaptureFixture[str]) -> None:
    with loopback(swept / "cluster") as cluster:
        cluster.worker(halts=True)

        def interrupt() -> None:
            wait_for(lambda: cluster.halted, "the halt in the fourth block")
            os.kill(os.getpid(), signal.SIGINT)

        with meanwhile(interrupt):
            assert sweep(cluster, "-q") == 130
        assert "the same command goes on from there" in capsys.readouterr().err
        with run_lock(begun_liquid(swept / "out") / "liquid.h5"):
            pass
        # The worker is free again, and past its halt.
        assert sweep(cluster) in (0, 3)
    assert tables(swept / "out") == serial


def test_without_the_extra_it_is_named(
    swept: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.delitem(sys.modules, "mcgeo.runs.cluster")
    monkeypatch.delattr("mcgeo.runs.cluster")
    # So the import system takes it for a module that is not installed.
    monkeypatch.setitem(sys.modules, "distributed", None)
    assert main(["sweep", "run.yaml", "--scheduler", "tcp://127.0.0.1:1"]) == 2
    assert "pip install 'mcgeo[cluster]'" in capsys.readouterr().err


def test_workers_are_those_of_one_place(swept: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["sweep", "run.yaml", "--scheduler", "tcp://127.0.0.1:1", "--workers", "2"]) == 2
    assert "--scheduler and --workers: give one" in capsys.readouterr().err


def test_a_scheduler_that_does_not_answer(swept: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for where in ("missing.json", "tcp://127.0.0.1:1"):
        with dask.config.set({"distributed.comm.timeouts.connect": "1s"}):
            assert main(["sweep", "run.yaml", "--scheduler", where]) == 2
        said = capsys.readouterr().err
        assert said.startswith(f"{where}: no scheduler answers") and "dask scheduler" in said
    assert not list(swept.glob("run_sweep/*"))


def test_a_worker_that_does_not_see_the_folder(tmp_path: Path) -> None:
    mark = tmp_path / "mark"
    assert unfit("run", versions(), mark) == f"does not see the folder {tmp_path}"
    mark.touch()
    assert unfit("run", versions(), mark) == ""
