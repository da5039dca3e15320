"""The scripts for a batch system do what they say, in its absence."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import psutil
import pytest

from mcgeo.cli import main
from tests.cli.conftest import ROOT
from tests.cluster.conftest import tables

# Two workers, where the batch system would start one per task of the job.
SRUN = """#!/bin/sh
"$@" &
first=$!
"$@" &
trap 'kill $first $!' TERM
wait
"""


@pytest.fixture
def environment(swept: Path) -> dict[str, str]:
    """With the programs that the scripts call on the path."""
    programs = {"srun": SRUN}
    for name in ("mcgeo", "dask"):
        programs[name] = f'#!/bin/sh\nexec "{sys.executable}" -m {name} "$@"\n'
    (swept / "bin").mkdir()
    for name, text in programs.items():
        (swept / "bin" / name).write_text(text)
        (swept / "bin" / name).chmod(0o755)
    path = f"{swept / 'bin'}{os.pathsep}{os.environ['PATH']}"
    return {**os.environ, "PATH": path, "PYTHONPATH": os.fspath(ROOT), "TMPDIR": os.fspath(swept)}


def run(script: str, *arguments: str, environment: dict[str, str]) -> subprocess.CompletedProcess[str]:
    command = ["sh", os.fspath(ROOT / "scripts" / script), "run.yaml", *arguments]
    return subprocess.run(command, env=environment, text=True, capture_output=True, check=False)


def test_array(swept: Path, serial: dict[str, bytes], environment: dict[str, str]) -> None:
    given = {**environment, "SLURM_ARRAY_TASK_ID": "2", "SLURM_CPUS_PER_TASK": "1"}
    done = run("slurm_array.sh", "2", "-q", environment=given)
    assert done.returncode in (0, 3), done.stderr
    assert "shard               2/2" in done.stdout
    assert main(["sweep", "run.yaml", "--shard", "1/2", "--workers", "1", "-q"]) in (0, 3)
    assert main(["sweep", "run.yaml", "--gather"]) in (0, 3)
    assert tables(swept / "run_sweep") == serial


@pytest.mark.long
def test_workers_of_one_job(swept: Path, serial: dict[str, bytes], environment: dict[str, str]) -> None:
    # The interface of this machine alone, whatever its name.
    found = psutil.net_if_addrs()
    loop = next(name for name, at in found.items() if any(address.address == "127.0.0.1" for address in at))
    done = run("slurm_dask.sh", "-q", environment={**environment, "DASK_INTERFACE": loop})
    assert done.returncode in (0, 3), done.stderr
    assert tables(swept / "run_sweep") == serial
    assert not list(swept.glob("scheduler-*"))
