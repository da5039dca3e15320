"""Workers that die over one task or have other versions, and a sweep that is killed."""

from __future__ import annotations

import json
import os
import signal
from pathlib import Path

import pytest

from mcgeo.cli import main
from mcgeo.runs.lock import run_lock
from tests.cli.conftest import python_process
from tests.cluster.conftest import tables
from tests.cluster.loopback import loopback, meanwhile, wait_for

DIES_OVER_ONE_SEED = """
import os
from mcgeo.runs import production
undisturbed = getattr(production.next_block, "undisturbed", production.next_block)
def next_block(state, measurement, schedule, *others):
    if schedule.seed == 4:
        os._exit(1)
    return undisturbed(state, measurement, schedule, *others)
next_block.undisturbed = undisturbed
production.next_block = next_block
"""
HAS_ANOTHER_LIBRARY = """
from mcgeo.runs import cluster_worker
found = cluster_worker.versions()
cluster_worker.versions = lambda: {**found, "numpy": "1.0"}
"""


@pytest.mark.long
def test_a_task_over_which_workers_die_fails_alone(swept: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    # The scheduler gives a task up at the first death, not the fourth.
    monkeypatch.setenv("DASK_DISTRIBUTED__SCHEDULER__ALLOWED_FAILURES", "0")
    with loopback(swept / "cluster") as cluster:
        deadly = cluster.worker(first=DIES_OVER_ONE_SEED)

        def replace() -> None:
            wait_for(lambda: deadly.poll() is not None, "the death of the worker")
            cluster.worker()

        with meanwhile(replace):
            assert main(["sweep", "run.yaml", "--out", "out", "--scheduler", cluster.address]) == 4
    found = json.loads((swept / "out/sweep.json").read_text())
    assert (found["done"], found["failed"], found["missing"]) == (3, 3, 0)
    assert {failure["point"]["sampling.seed"] for failure in found["failures"]} == {4}
    assert all(failure["error"].startswith("sampling: workers died over it") for failure in found["failures"])


@pytest.mark.long
def test_a_worker_with_other_versions_that_joins_late_is_sent_away(
    swept: Path, serial: dict[str, bytes], capsys: pytest.CaptureFixture[str]
) -> None:
    with loopback(swept / "cluster") as cluster:
        halting = cluster.worker(halts=True)

        def join() -> None:
            wait_for(lambda: cluster.halted, "the halt in the fourth block")
            other = cluster.worker(first=HAS_ANOTHER_LIBRARY)
            wait_for(lambda: other.poll() is not None, "the end of the worker with another library")
            cluster.worker()
            halting.kill()

        with meanwhile(join):
            assert main(["sweep", "run.yaml", "--out", "out", "--scheduler", cluster.address, "-q"]) in (0, 3)
    said = capsys.readouterr().err
    assert "has numpy 1.0 instead of" in said and "it is sent away" in said
    assert tables(swept / "out") == serial


@pytest.mark.long
def test_workers_stop_when_the_sweep_is_killed(swept: Path, serial: dict[str, bytes]) -> None:
    with loopback(swept / "cluster") as cluster:
        cluster.worker(halts=True)
        command = ["sweep", "run.yaml", "--out", "out", "--scheduler", cluster.address, "-q"]
        first = python_process(swept, "-m", "mcgeo", *command)
        wait_for(lambda: cluster.halted, "the halt in the fourth block")
        first.send_signal(signal.SIGKILL)
        first.communicate()
        # The task ends as soon as it is no longer wanted, and its worker serves the next sweep.
        assert main(command) in (0, 3)
        folders = list((swept / "out/liquids").iterdir())
        assert len(folders) == 2
        for folder in folders:
            with run_lock(folder / "liquid.h5"):
                assert os.listdir(folder)
    assert tables(swept / "out") == serial
