"""Runs that are killed at any moment: a process that starts them without waiting for imports, and what is left."""

from __future__ import annotations

import json
import random
import subprocess
from collections import Counter
from collections.abc import Sequence
from pathlib import Path
from types import TracebackType
from typing import Any

import h5py

from tests.cli.conftest import contents, python_process

# Forks itself for every run, before it has any thread. The first argument is a list of commands that load the kernels;
# the second the seconds that the disk takes for a file, so that kills meet half-written ones.
FORKER = """
import contextlib, io, json, os, sys, time
from mcgeo.cli import main

disk = os.fsync

def slow_disk(handle):
    time.sleep(float(sys.argv[2]))
    disk(handle)

os.fsync = slow_disk

def run(arguments):
    os.dup2(os.open(os.devnull, os.O_WRONLY), 1)
    os.dup2(os.open("log", os.O_WRONLY | os.O_CREAT | os.O_APPEND), 2)
    code = 1
    try:
        code = main(arguments)
    finally:
        os._exit(code)

def ended(pid, options=0):
    found, status = os.waitpid(pid, options)
    return (os.waitstatus_to_exitcode(status),) if found else None

with contextlib.redirect_stdout(io.StringIO()):
    for arguments in json.loads(sys.argv[1]):
        assert main(arguments) in (0, 3)
print("ready", file=sys.stderr, flush=True)
for line in sys.stdin:
    arguments, seconds = json.loads(line)
    started = time.monotonic()
    pid = os.fork()
    if pid == 0:
        run(arguments)
    code = None
    while code is None and (seconds is None or time.monotonic() - started < seconds):
        time.sleep(0.0005)
        code = ended(pid, os.WNOHANG)
    if code is None:
        os.kill(pid, 9)
        code = ended(pid)
    print(json.dumps([code[0], time.monotonic() - started]), flush=True)
"""
KILLED = -9
_SECONDS_OF_THE_DISK = 0.02


class Forker:
    """Runs commands in processes of their own, some of which it kills; a context manager.

    Parameters
    ----------
    folder : Path
        Where the commands run.
    first : sequence of list of str
        Commands that the process runs itself, so that its children find their kernels loaded.
    """

    def __init__(self, folder: Path, first: Sequence[Sequence[str]]) -> None:
        arguments = ["-c", FORKER, json.dumps(first), str(_SECONDS_OF_THE_DISK)]
        self._process = python_process(folder, *arguments, stdin=subprocess.PIPE)

    def __enter__(self) -> Forker:
        assert self._process.stderr is not None
        lines = []
        for line in self._process.stderr:
            lines.append(line)
            if line == "ready\n":
                return self
        raise AssertionError("".join(lines))

    def __exit__(
        self, kind: type[BaseException] | None, value: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._process.communicate(timeout=60)

    def run(self, arguments: Sequence[str], seconds: float | None = None) -> tuple[int, float]:
        """Exit code of a command that is killed after so many seconds, if it has not ended by then, and its time."""
        assert self._process.stdin is not None and self._process.stdout is not None
        print(json.dumps([arguments, seconds]), file=self._process.stdin, flush=True)
        code, taken = json.loads(self._process.stdout.readline())
        return code, taken


def held_blocks(folder: Path) -> tuple[int, bool]:
    """Blocks in the result file, and whether it is whole; every file that is there can be read."""
    path = folder / "liquid.h5"
    if not path.exists():
        return 0, False
    with h5py.File(path) as file:
        return file["blocks/drift"].shape[1], bool(file.attrs["complete"])


def phase(folder: Path) -> str:
    """In which phase a run was killed, by what it has left."""
    if not folder.exists():
        return "start"
    blocks, whole = held_blocks(folder)
    if list(folder.glob(".*.part")):
        return "writing"
    if whole:
        return "end"
    if blocks:
        return "production"
    return "first block" if (folder / "equilibrated.h5").exists() else "equilibration"


class Killer:
    """Starts a command again and again, kills it at random moments, and counts in which phase.

    Parameters
    ----------
    forker : Forker
    root : Path
        Where the commands run.
    seed : int
    """

    def __init__(self, forker: Forker, root: Path, seed: int) -> None:
        self._forker, self._root = forker, root
        self._random = random.Random(seed)
        self.phases: Counter[str] = Counter()

    def to_the_end(self, arguments: Sequence[str], name: str, longest: float, options: Sequence[str] = ()) -> None:
        """Kill the command after up to ``longest`` seconds until it has ended once.

        Options are given until the file says that it is being made longer; then the command without them goes on.
        """
        before = held_blocks(self._root / name)[0]
        while True:
            asked = [*arguments, "--out", name]
            blocks, whole = held_blocks(self._root / name)
            if options and blocks == before and whole:
                asked += options
            code, _ = self._forker.run(asked, self._random.uniform(0.0, longest))
            if code != KILLED:
                assert code in (0, 3), (code, (self._root / "log").read_text()[-2000:])
                return
            self.phases[phase(self._root / name)] += 1


def assert_same_run(one: Path, two: Path) -> None:
    """Two result files hold the same to the last bit, and nothing lies beside them but what a run leaves."""
    found, wanted = contents(one / "liquid.h5"), contents(two / "liquid.h5")
    assert found.keys() == wanted.keys()
    different = [name for name in wanted if found[name] != wanted[name]]
    assert not different, different
    assert sorted(path.name for path in one.iterdir()) == ["liquid.h5", "sample.json"]


def summary_of(folder: Path) -> Any:
    """``sample.json`` without what tells of time."""
    found = json.loads((folder / "sample.json").read_text())
    del found["seconds"], found["moves_per_second"]
    return found
