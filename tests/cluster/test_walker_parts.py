"""Walkers of one liquid divided among workers: the bits of the undivided run."""

from __future__ import annotations

import signal
from pathlib import Path

import pytest

from mcgeo.cli import main
from mcgeo.runs.sweep_liquids import liquid_progress
from tests.cluster.conftest import SWEEP, numbers, tables
from tests.cluster.loopback import loopback, meanwhile, wait_for


@pytest.fixture
def in_parts(swept: Path) -> Path:
    """The sweep with the walkers of each liquid, two groups of eight, divided."""
    (swept / "run.yaml").write_text(SWEEP + "  walker_parts: 2\n")
    return swept


def test_parts_on_processes(in_parts: Path, serial: dict[str, bytes]) -> None:
    for workers in (1, 2):
        assert main(["sweep", "run.yaml", "--out", f"out{workers}", "--workers", str(workers), "-q"]) in (0, 3)
        folder = in_parts / f"out{workers}"
        assert numbers(tables(folder)) == numbers(serial)
        assert {path.name for path in folder.glob("liquids/*/*")} == {"liquid.h5"}


@pytest.mark.long
def test_parts_on_a_cluster_of_which_a_worker_dies(in_parts: Path, serial: dict[str, bytes]) -> None:
    with loopback(in_parts / "cluster", workers=1) as cluster:
        # Blocks of a part or of the next one: the fourth comes when one block at least is in a file.
        halting = cluster.worker(halts=True)

        def kill() -> None:
            wait_for(lambda: cluster.halted, "the halt in the fourth block")
            assert list(in_parts.glob("out/liquids/*/part_*_of_2.h5"))
            halting.send_signal(signal.SIGKILL)

        with meanwhile(kill):
            assert main(["sweep", "run.yaml", "--out", "out", "--scheduler", str(cluster.file)]) in (0, 3)
    assert numbers(tables(in_parts / "out")) == numbers(serial)


@pytest.mark.long
def test_a_sampling_begun_whole_is_ended_whole(
    in_parts: Path, serial: dict[str, bytes]
) -> None:
    with loopback(in_parts / "cluster") as cluster:
        (in_parts / "whole.yaml").write_text(SWEEP)
        cluster.worker(halts=True)

        def stop() -> None:
            wait_for(lambda: cluster.halted, "the halt in the fourth block")
            signal.raise_signal(signal.SIGTERM)

        command = ["--out", "out", "--scheduler", str(cluster.file), "-q"]
        with meanwhile(stop):
            assert main(["sweep", "whole.yaml", *command]) == 143
        begun = [path.name for path in (in_parts / "out/liquids").iterdir()]
        assert [liquid_progress(in_parts / "out", liquid).blocks > 0 for liquid in begun] == [True]
        assert main(["sweep", "run.yaml", *command]) in (0, 3)
    assert numbers(tables(in_parts / "out")) == numbers(serial)


def test_what_cannot_be_divided(in_parts: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for given, said in (
        ("walkers: 8", "8 walkers are 1 groups of 8, which cannot be dealt into 2 parts"),
        ("target_error: 0.001, walkers: 16", "sampling.target_error: must be null for a run in parts"),
    ):
        (in_parts / "run.yaml").write_text(SWEEP.replace("walkers: 16", given) + "  walker_parts: 2\n")
        assert main(["sweep", "run.yaml"]) == 2
        assert said in capsys.readouterr().err
    assert not (in_parts / "run_sweep").exists()
