"""Two processes on one result file: one writes, the other is told by whom; readers are not held up."""

from __future__ import annotations

import errno
import os
import signal
import socket
import subprocess
from pathlib import Path

import pytest

from mcgeo.cli import main
from mcgeo.runs import lock
from mcgeo.runs.lock import run_lock
from tests.cli.conftest import SMALL, python_process

# The program itself, but for a halt at the fourth block, after three have been saved, until the file `go` is there.
HALT = """
import sys, time
from pathlib import Path
from mcgeo.runs import production
advance, blocks = production.next_block, []
def next_block(*arguments):
    blocks.append(None)
    if len(blocks) == 4:
        print("fourth block", file=sys.stderr, flush=True)
        while not Path("go").exists():
            time.sleep(0.01)
    return advance(*arguments)
production.next_block = next_block
from mcgeo.cli import main
sys.exit(main(sys.argv[1:]))
"""
SAMPLE = ["sample", "run.yaml", "--out", "results"]


def started(folder: Path) -> subprocess.Popen[str]:
    """A run that has come to the halt."""
    (folder / "run.yaml").write_text(SMALL.replace("  seed: 5", "  seed: 5\n  checkpoint_seconds: 0"))
    process = python_process(folder, "-c", HALT, *SAMPLE)
    assert process.stderr is not None
    assert any("fourth block" in line for line in process.stderr)
    return process


def test_second_writer_is_refused_and_readers_are_not(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    first = started(tmp_path)
    monkeypatch.chdir(tmp_path)
    saved = (tmp_path / "results/liquid.h5").read_bytes()
    try:
        for options in ([], ["--overwrite"]):
            assert main([*SAMPLE, *options]) == 2
            captured = capsys.readouterr()
            holder = f"process {first.pid} on {socket.gethostname()}"
            assert captured.out == "" and holder in captured.err and len(captured.err.splitlines()) == 1
        assert main(["scan", "results/liquid.h5"]) == 3
        assert main(["plot", "trace", "results", "--format", "svg"]) == 0
        assert (tmp_path / "results/liquid.h5").read_bytes() == saved
        (tmp_path / "go").touch()
        _, err = first.communicate(timeout=120)
    finally:
        first.kill()
    assert first.returncode == 0, err
    assert main(SAMPLE) == 0
    assert "holds this liquid already" in capsys.readouterr().err
    assert not [path.name for path in (tmp_path / "results").iterdir() if path.name.startswith(".")]


def test_lock_of_a_killed_process_is_free(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    first = started(tmp_path)
    first.send_signal(signal.SIGKILL)
    first.communicate(timeout=60)
    assert (tmp_path / "results/.liquid.h5.lock").exists()
    monkeypatch.chdir(tmp_path)
    assert main(SAMPLE) == 0
    assert "block 8/8" in capsys.readouterr().err
    assert not [path.name for path in (tmp_path / "results").iterdir() if path.name.startswith(".")]


def test_lock_is_given_back_and_leaves_nothing(tmp_path: Path) -> None:
    path = tmp_path / "deep" / "results" / "liquid.h5"
    for _ in range(2):
        with run_lock(path), pytest.raises(lock.StorageError, match=f"process {os.getpid()} on"), run_lock(path):
            pass
        assert not path.parent.exists()


def test_lock_file_of_which_the_name_was_taken_away_is_not_trusted(tmp_path: Path) -> None:
    """The holder removes the name before it gives the lock back; whoever waited at the old file starts anew."""
    path = tmp_path / "liquid.h5"
    with run_lock(path):
        (tmp_path / ".liquid.h5.lock").unlink()
        with run_lock(path):
            assert str(os.getpid()) in (tmp_path / ".liquid.h5.lock").read_text()


def test_file_system_without_locks_is_noted(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    def refuse(handle: int, operation: int) -> None:
        raise OSError(errno.ENOLCK, os.strerror(errno.ENOLCK))

    monkeypatch.setattr(lock.fcntl, "flock", refuse)
    with run_lock(tmp_path / "liquid.h5"):
        assert "has no locks" in capsys.readouterr().err


def test_lock_file_that_is_a_link_is_not_followed(tmp_path: Path) -> None:
    target = tmp_path / "precious"
    target.write_text("kept")
    (tmp_path / ".liquid.h5.lock").symlink_to(target)
    with pytest.raises(lock.StorageError, match="cannot be written"), run_lock(tmp_path / "liquid.h5"):
        pass
    assert target.read_text() == "kept"
