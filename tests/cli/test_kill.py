"""Runs killed with SIGKILL at random moments end, when started again, as if nothing had happened."""

from __future__ import annotations

import json
import random
import signal
import time
from pathlib import Path

import h5py
import pytest

from tests.cli.conftest import python_process
from tests.cli.killing import Forker, Killer, assert_same_run, held_blocks, phase, summary_of

# Every block is written as soon as it is there.
SAMPLING = (
    "sampling: {{walkers: 16, sweeps: {sweeps}, equilibration: {equilibration}, blocks: 8, seed: 7, q_max: 5,"
    " checkpoint_seconds: 0, threads: {threads}{more}}}\n"
)
STATES = {
    "laughlin": "state: {kind: laughlin, exponent: 3, electrons: 12}\n",
    "all_sectors": "state: {kind: moore_read, filling: 1/2, electrons: 6}\n",
    "one_sector": "state: {kind: moore_read, filling: 1, electrons: 6, sector: 2}\n",
    "sea": "state: {kind: fermi_sea, filling: 1/2, electrons: 7}\n",
    "conjugate": "state: {kind: laughlin, exponent: 3, electrons: 10, conjugate: true}\n",
    "droplet": "state: {kind: laughlin, exponent: 3, electrons: 12}\ngeometry: {kind: disk}\n",
    "pfaffian_droplet": "state: {kind: moore_read, filling: 1/2, electrons: 6}\ngeometry: {kind: disk}\n",
}
# Sweeps of production and of equilibration that take some tenths of a second each.
LENGTHS = {"laughlin": (4000, 600), "conjugate": (4000, 600), "droplet": (16000, 2400), "sea": (400, 60)}


def write(folder: Path, name: str, state: str, threads: int, more: str = "") -> str:
    """A configuration file; its name."""
    sweeps, equilibration = LENGTHS.get(state, (2000, 300))
    text = STATES[state] + SAMPLING.format(sweeps=sweeps, equilibration=equilibration, threads=threads, more=more)
    (folder / f"{name}.yaml").write_text(text)
    return f"{name}.yaml"


def warm(folder: Path, states: list[str]) -> Forker:
    """A process whose children find the kernels of these states loaded."""
    commands = []
    for state in states:
        name = write(folder, f"warm_{state}", state, 1)
        text = (folder / name).read_text()
        sweeps, equilibration = LENGTHS.get(state, (2000, 300))
        (folder / name).write_text(text.replace(f"{sweeps}", "16").replace(f"{equilibration}", "20"))
        commands.append(["sample", name, "-q"])
    return Forker(folder, commands)


def whole_run(forker: Forker, config: str, folder: str, *options: str) -> float:
    """A run that nobody kills; the seconds it took."""
    code, seconds = forker.run(["sample", config, "-q", "--out", folder, *options])
    assert code in (0, 3)
    return seconds


def check_kills(forker: Forker, root: Path, state: str, threads: int, n_kills: int, seed: int) -> Killer:
    """Kill runs of a state until so many kills are survived."""
    config = write(root, f"{state}_{threads}", state, threads)
    seconds = whole_run(forker, config, f"{state}_{threads}_whole")
    killer = Killer(forker, root, seed)
    number = 0
    while killer.phases.total() < n_kills:
        name = f"{state}_{threads}_{number}"
        killer.to_the_end(["sample", config, "-q"], name, 0.7 * seconds)
        assert_same_run(root / name, root / f"{state}_{threads}_whole")
        assert summary_of(root / name) == summary_of(root / f"{state}_{threads}_whole")
        number += 1
    return killer


def check_extension(forker: Forker, root: Path, state: str, n_kills: int, seed: int) -> Killer:
    """The same of runs that are made longer by half."""
    config = write(root, f"{state}_extended", state, 1)
    whole_run(forker, config, f"{state}_long")
    options = ["--extend", str(LENGTHS.get(state, (2000, 300))[0] // 2)]
    seconds = whole_run(forker, config, f"{state}_long", *options)
    killer = Killer(forker, root, seed)
    number = 0
    while killer.phases.total() < n_kills:
        name = f"{state}_extended_{number}"
        whole_run(forker, config, name)
        while held_blocks(root / name) != (12, True):
            killer.to_the_end(["sample", config, "-q"], name, 0.7 * seconds, options)
        assert_same_run(root / name, root / f"{state}_long")
        number += 1
    return killer


def check_target(forker: Forker, root: Path, n_kills: int, seed: int) -> Killer:
    """The same of runs that go on until the error is small enough."""
    whole_run(forker, write(root, "eight", "laughlin", 1), "eight_whole")
    error = 0.75 * json.loads((root / "eight_whole/sample.json").read_text())["energy_plane"]["error"]
    config = write(root, "target", "laughlin", 1, f", target_error: {error!r}")
    seconds = whole_run(forker, config, "target_whole")
    assert held_blocks(root / "target_whole")[0] > 8
    killer = Killer(forker, root, seed)
    number = 0
    while killer.phases.total() < n_kills:
        killer.to_the_end(["sample", config, "-q"], f"target_{number}", 0.7 * seconds)
        assert_same_run(root / f"target_{number}", root / "target_whole")
        number += 1
    return killer


def test_killed_runs_end_like_a_run_that_nobody_killed(tmp_path: Path) -> None:
    with warm(tmp_path, ["laughlin", "all_sectors"]) as forker:
        check_kills(forker, tmp_path, "laughlin", 1, 3, seed=1)
        check_kills(forker, tmp_path, "all_sectors", 2, 3, seed=2)
        check_extension(forker, tmp_path, "laughlin", 2, seed=3)
        check_target(forker, tmp_path, 2, seed=4)


def test_a_block_that_was_lost_is_noticed(tmp_path: Path) -> None:
    """The comparison of the files fails for a run that forgot one of its blocks, or drew one anew."""
    config = write(tmp_path, "run", "laughlin", 1)
    other = write(tmp_path, "other", "laughlin", 1)
    (tmp_path / other).write_text((tmp_path / other).read_text().replace("seed: 7", "seed: 8"))
    with warm(tmp_path, ["laughlin"]) as forker:
        for name, yaml in (("one", config), ("two", config), ("three", other)):
            whole_run(forker, yaml, name)
    assert_same_run(tmp_path / "two", tmp_path / "one")
    with h5py.File(tmp_path / "three/liquid.h5") as source, h5py.File(tmp_path / "two/liquid.h5", "r+") as file:
        file["blocks/trace"][0, 7] = source["blocks/trace"][0, 7]
    with pytest.raises(AssertionError, match="blocks/trace"):
        assert_same_run(tmp_path / "two", tmp_path / "one")


@pytest.mark.long
@pytest.mark.parametrize("threads", [1, 2])
@pytest.mark.parametrize("state", STATES)
def test_every_state_survives_kills(tmp_path: Path, state: str, threads: int) -> None:
    with warm(tmp_path, [state]) as forker:
        killer = check_kills(forker, tmp_path, state, threads, 10, seed=10 * threads + len(state))
    print(f"{state} on {threads} threads: {killer.phases.total()} kills, {dict(killer.phases)}")


@pytest.mark.long
@pytest.mark.parametrize("state", ["laughlin", "all_sectors", "droplet"])
def test_extensions_survive_kills(tmp_path: Path, state: str) -> None:
    with warm(tmp_path, [state]) as forker:
        killer = check_extension(forker, tmp_path, state, 8, seed=20 + len(state))
    print(f"{state} extended: {killer.phases.total()} kills, {dict(killer.phases)}")


@pytest.mark.long
def test_open_runs_survive_kills(tmp_path: Path) -> None:
    with warm(tmp_path, ["laughlin"]) as forker:
        killer = check_target(forker, tmp_path, 12, seed=30)
    print(f"target: {killer.phases.total()} kills, {dict(killer.phases)}")


@pytest.mark.long
def test_the_true_command_survives_kills(tmp_path: Path) -> None:
    config = write(tmp_path, "run", "laughlin", 2)
    command = ["-m", "mcgeo", "sample", config, "-q", "--out"]

    def started(folder: str, seconds: float | None) -> int:
        process = python_process(tmp_path, *command, folder)
        if seconds is not None:
            time.sleep(seconds)
            process.send_signal(signal.SIGKILL)
        process.communicate()
        return process.returncode

    before = time.monotonic()
    assert started("whole", None) in (0, 3)
    longest = time.monotonic() - before
    delays, phases = random.Random(40), []
    while started("killed", delays.uniform(0.3, 1.0) * longest) == -signal.SIGKILL:
        phases.append(phase(tmp_path / "killed"))
    assert phases
    assert_same_run(tmp_path / "killed", tmp_path / "whole")
    print(f"true command: {len(phases)} kills, {phases}")
