"""Full disks, folders that cannot be written, read or found: a plain line, exit code 2, older files untouched."""

from __future__ import annotations

import io
import os
import resource
import shutil
import subprocess
import traceback
from collections.abc import Callable, Iterator
from contextlib import contextmanager, redirect_stderr, redirect_stdout
from pathlib import Path
from typing import Any

import pytest

from mcgeo.cli import main
from mcgeo.runs import production
from mcgeo.runs.storage import read_result
from tests.cli.conftest import SMALL
from tests.cli.test_interruption import contents

ROOM = 600_000
NOBODY = 65534
SAMPLE = ["sample", "run.yaml", "--out", "out", "-q"]


class Disk:
    """A folder whose disk can be filled: a small file system of its own, or a limit of what a file may hold."""

    def __init__(self, folder: Path, mounted: bool) -> None:
        self.folder, self.mounted = folder, mounted
        self._limits = resource.getrlimit(resource.RLIMIT_FSIZE)

    def fill(self) -> None:
        if self.mounted:
            with open(self.folder / "filler", "wb", buffering=0) as file:
                try:
                    while file.write(bytes(4096)):
                        pass
                except OSError:
                    pass
        else:
            resource.setrlimit(resource.RLIMIT_FSIZE, (100, self._limits[1]))

    def clear(self) -> None:
        if self.mounted:
            (self.folder / "filler").unlink(missing_ok=True)
        else:
            resource.setrlimit(resource.RLIMIT_FSIZE, self._limits)

    def lock(self) -> bool:
        """No more writing at all; False where that cannot be had of this disk."""
        return self.mounted and _run("mount", "-o", "remount,ro", str(self.folder))


def _run(*command: str) -> bool:
    return shutil.which(command[0]) is not None and subprocess.run(command, capture_output=True).returncode == 0


@contextmanager
def small_disk(folder: Path) -> Iterator[Disk]:
    folder.mkdir()
    mounted = _run("mount", "-t", "tmpfs", "-o", f"size={ROOM}", "tmpfs", str(folder))
    disk = Disk(folder, mounted)
    try:
        yield disk
    finally:
        if mounted:
            _run("umount", "-l", str(folder))
        else:
            disk.clear()


@pytest.fixture(params=["file system", "limit"])
def disk(request: pytest.FixtureRequest, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Iterator[Disk]:
    """Current folder on a small disk that holds ``run.yaml``; where none can be mounted both are limits."""
    if request.param == "file system":
        with small_disk(tmp_path / "disk") as found:
            monkeypatch.chdir(found.folder)
            (found.folder / "run.yaml").write_text(SMALL)
            yield found
            monkeypatch.chdir(tmp_path)
    else:
        monkeypatch.chdir(tmp_path)
        (tmp_path / "run.yaml").write_text(SMALL)
        found = Disk(tmp_path, mounted=False)
        yield found
        found.clear()


def refused(arguments: list[str], capsys: pytest.CaptureFixture[str], words: str) -> str:
    """The command ends with exit code 2 and one line."""
    capsys.readouterr()
    assert main(arguments) == 2
    captured = capsys.readouterr()
    (line,) = captured.err.splitlines()
    assert captured.out == "" and words in line and ".part" not in line and "Errno" not in line
    return line


def hidden(folder: Path) -> list[str]:
    return [path.name for path in folder.rglob("*") if path.name.startswith(".")]


def before_block(number: int, action: Callable[[], object], monkeypatch: pytest.MonkeyPatch) -> None:
    """Save after every block, and act before one of them."""
    advance = production.next_block

    def next_block(state: Any, measurement: Any, schedule: Any, chain: Any, stop: Any) -> Any:
        if chain.blocks_done == number:
            action()
        return advance(state, measurement, schedule, chain, stop)

    monkeypatch.setattr(production, "next_block", next_block)
    monkeypatch.setattr(production.SaveClock, "due", True)


def test_full_from_the_start(disk: Disk, capsys: pytest.CaptureFixture[str]) -> None:
    disk.fill()
    refused(SAMPLE, capsys, "cannot be written")
    disk.clear()
    assert sorted(path.name for path in Path().iterdir() if path.name != "out") == ["run.yaml"]
    assert hidden(Path()) == []


def test_full_in_mid_run_then_room_is_made(
    disk: Disk, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch, liquid: bytes
) -> None:
    with monkeypatch.context() as patch:
        before_block(3, disk.fill, patch)
        line = refused(SAMPLE, capsys, "cannot be written")
    assert "out/liquid.h5: " in line and "is kept, and the same command goes on from there" in line
    disk.clear()
    kept = read_result(Path("out/liquid.h5"))
    assert kept.n_blocks == 3 and not kept.complete and hidden(Path("out")) == []
    assert main(SAMPLE) == 0
    Path("whole.h5").write_bytes(liquid)
    assert contents(Path("out/liquid.h5")) == contents(Path("whole.h5"))


@pytest.mark.parametrize(
    ("command", "older"),
    [
        (["scan", "out/liquid.h5", "-q"], "scan.json"),
        (["sample", "out/liquid.h5", "-q"], "sample.json"),
        (["plot", "trace", "out", "--format", "svg"], "trace.svg"),
    ],
)
def test_full_when_results_are_written(
    disk: Disk, capsys: pytest.CaptureFixture[str], liquid: bytes, command: list[str], older: str
) -> None:
    Path("out").mkdir()
    Path("out/liquid.h5").write_bytes(liquid)
    assert main(command) == 0
    before = {path: path.read_bytes() for path in Path("out").iterdir()}
    disk.fill()
    line = refused(command, capsys, "choose another place with --out")
    disk.clear()
    assert line.startswith(f"out/{older}: ")
    assert {path: path.read_bytes() for path in Path("out").iterdir()} == before


def test_disk_that_may_only_be_read(tmp_path: Path, capsys: pytest.CaptureFixture[str], liquid: bytes) -> None:
    """A mount without writing, or, where none is permitted, a folder without the right to write."""
    with small_disk(tmp_path / "disk") as disk:
        (disk.folder / "run.yaml").write_text(SMALL)
        (disk.folder / "done").mkdir()
        (disk.folder / "done/liquid.h5").write_bytes(liquid)
        locked = disk.lock()
        if not locked:
            for folder in (disk.folder / "done", disk.folder):
                folder.chmod(0o555)
        run, done = str(disk.folder / "run.yaml"), str(disk.folder / "done")
        refused(["sample", run, "--out", str(disk.folder / "new"), "-q"], capsys, "cannot be written")
        refused(["scan", done, "-q"], capsys, "choose another place with --out")
        refused(["plot", "trace", done], capsys, "choose another place with --out")
        assert main(["scan", f"{done}/liquid.h5", "--out", str(tmp_path / "elsewhere"), "-q"]) == 0
        assert main(["scan", run, "--liquid", done, "--out", str(tmp_path / "elsewhere"), "-q"]) == 0
        if not locked:
            for folder in (disk.folder, disk.folder / "done"):
                folder.chmod(0o755)


def test_folder_that_vanishes_in_mid_run_is_made_again(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, liquid: bytes
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("run.yaml").write_text(SMALL)
    before_block(4, lambda: shutil.rmtree("out"), monkeypatch)
    assert main(SAMPLE) == 0
    Path("whole.h5").write_bytes(liquid)
    assert contents(Path("out/liquid.h5")) == contents(Path("whole.h5"))


def test_folder_that_becomes_a_file_in_mid_run(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("run.yaml").write_text(SMALL)

    def replace() -> None:
        Path("out").rename("moved")
        Path("out").write_text("a file")

    before_block(4, replace, monkeypatch)
    refused(SAMPLE, capsys, "out/liquid.h5: cannot be written")
    assert read_result(Path("moved/liquid.h5")).n_blocks == 4 and Path("out").read_text() == "a file"


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda: Path("out").write_text("a file"), "out: cannot be written: "),
        (lambda: Path("out/liquid.h5").mkdir(parents=True), "out/liquid.h5: not a file"),
        (lambda: (Path("out").mkdir(), os.mkfifo("out/liquid.h5")), "out/liquid.h5: not a file"),
        (lambda: Path("out").symlink_to("nowhere/at/all"), "out: cannot be written: "),
    ],
    ids=["a file", "a folder", "a pipe", "a link to nowhere"],
)
def test_something_else_is_there(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
    make: Callable[[], object],
    words: str,
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("run.yaml").write_text(SMALL)
    make()
    before = sorted(Path().rglob("*"))
    refused(SAMPLE, capsys, words)
    assert sorted(Path().rglob("*")) == before


def as_nobody(action: Callable[[], int]) -> tuple[int, str]:
    """Exit code and standard error of an action of a user without rights to others' files."""
    reading, writing = os.pipe()
    child = os.fork()
    if child == 0:
        os.close(reading)
        if os.getuid() == 0:
            os.setgroups([])
            os.setgid(NOBODY)
            os.setuid(NOBODY)
        code, err = 99, io.StringIO()
        try:
            with redirect_stderr(err), redirect_stdout(io.StringIO()):
                code = action()
        except BaseException:
            traceback.print_exc(file=err)
        finally:
            # Whatever happens, no second process goes on with the tests.
            os.write(writing, err.getvalue().encode())
            os._exit(code)
    os.close(writing)
    with open(reading) as answer:
        said = answer.read()
    return os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]), said


def test_user_without_the_right_to(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], liquid: bytes
) -> None:
    monkeypatch.chdir(tmp_path)
    # Names are relative: what lies above is not looked at.
    tmp_path.chmod(0o755)
    Path("run.yaml").write_text(SMALL)
    Path("out").mkdir()
    Path("out/liquid.h5").write_bytes(liquid)
    # All that is loaded late is loaded by the one who may.
    for command in (["scan", "out", "-q"], ["plot", "trace", "out", "--format", "svg"], ["check", "run.yaml"]):
        assert main(command) == 0
    Path("secret.yaml").write_text(SMALL)
    Path("out/liquid.h5").chmod(0)
    Path("secret.yaml").chmod(0)
    Path("out").chmod(0o555)
    for arguments, words in (
        (["scan", "out"], "out/liquid.h5: cannot be read: Permission denied"),
        (["plot", "trace", "out"], "out/liquid.h5: cannot be read: Permission denied"),
        (["check", "secret.yaml"], "secret.yaml: the file cannot be read: Permission denied"),
        (["sample", "run.yaml", "--out", "out", "--overwrite"], "out: cannot be written: Permission denied"),
        (["sample", "run.yaml", "--out", "other/folder"], "other/folder: cannot be written: Permission denied"),
    ):
        code, said = as_nobody(lambda arguments=arguments: main(arguments))
        assert code == 2 and words in said and len(said.splitlines()) == 1, said
    Path("out").chmod(0o755)
