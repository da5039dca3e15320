"""Bytes that changed, files cut off, files of other formats: refused, and what is whole beside them is named."""

from __future__ import annotations

import io
import random
from collections.abc import Iterator
from pathlib import Path

import h5py
import numpy as np
import pytest

import mcgeo
from mcgeo.cli import main
from mcgeo.errors import StorageError
from mcgeo.runs.seal import BLOCK_SIZE, seal
from mcgeo.runs.storage import FORMAT, previous_file, read_result
from tests.cli.conftest import SMALL
from tests.cli.test_interruption import contents
from tests.faults.child import Child

N_FLIPS, N_CUTS = 250, 30


@pytest.fixture(scope="module")
def child(tmp_path_factory: pytest.TempPathFactory, liquid: bytes) -> Iterator[tuple[Child, Path]]:
    folder = tmp_path_factory.mktemp("damaged")
    (folder / "good.h5").write_bytes(liquid)
    with Child(folder) as process:
        assert process.run("sample", "good.h5", "-q", "--out", "out").code == 0
        yield process, folder


def test_no_changed_byte_is_read(tmp_path: Path, liquid: bytes) -> None:
    """At random places, and at every byte of the first block and of what HDF5 keeps first."""
    numbers = random.Random(20301)
    places = [numbers.randrange(len(liquid)) for _ in range(N_FLIPS)] + list(range(BLOCK_SIZE + 100))
    for place in places:
        damaged = bytearray(liquid)
        damaged[place] ^= 1 << numbers.randrange(8)
        (tmp_path / "liquid.h5").write_bytes(damaged)
        with pytest.raises(StorageError) as caught:
            read_result(tmp_path / "liquid.h5")
        assert len(str(caught.value).splitlines()) == 1


def test_the_check_of_bytes_is_what_refuses_them(liquid: bytes) -> None:
    """Without the seal HDF5 reads a changed number without a word."""
    with h5py.File(io.BytesIO(liquid)) as file:
        place = file["blocks/trace"].id.get_offset()
        before = file["blocks/trace"][0, 0, 0, 0]
    damaged = bytearray(liquid)
    damaged[place + 1] ^= 1
    with h5py.File(io.BytesIO(bytes(damaged))) as file:
        assert file["blocks/trace"][0, 0, 0, 0] != before


@pytest.mark.parametrize("command", ["scan", "plot"])
def test_damaged_files_are_refused_by_commands(child: tuple[Child, Path], liquid: bytes, command: str) -> None:
    process, folder = child
    numbers = random.Random(20302)
    arguments = ("plot", "trace", "bad.h5") if command == "plot" else ("scan", "bad.h5")
    for cut in [0, 1, BLOCK_SIZE - 1, BLOCK_SIZE, len(liquid) - 1, *numbers.sample(range(len(liquid)), N_CUTS)]:
        (folder / "bad.h5").write_bytes(liquid[:cut])
        answer = process.run(*arguments, "--out", "nowhere")
        assert answer.code == 2 and answer.out == "" and len(answer.err.splitlines()) == 1
        assert answer.err.startswith("bad.h5: ") and not (folder / "nowhere").exists()


@pytest.mark.parametrize("n_files", [150, pytest.param(20_000, marks=pytest.mark.long)])
def test_changed_bytes_under_a_fitting_seal_harm_nobody(
    child: tuple[Child, Path], liquid: bytes, n_files: int
) -> None:
    """Damage made on purpose, which HDF5 itself meets: a result or a refusal, no crash, hang or traceback."""
    process, folder = child
    numbers = random.Random(20303)
    with h5py.File(io.BytesIO(liquid)) as file:
        long = [file[name] for name in ("blocks/trace", "blocks/means/structure", "blocks/counts/pairs")]
        arrays = [(array.id.get_offset(), array.nbytes) for array in long]
    codes = []
    for _ in range(n_files):
        damaged = bytearray(liquid)
        for _ in range(numbers.choice([1, 1, 4])):
            place = numbers.randrange(BLOCK_SIZE, len(damaged))
            while any(start <= place < start + size for start, size in arrays):
                place = numbers.randrange(BLOCK_SIZE, len(damaged))
            damaged[place] = numbers.randrange(256)
        seal(memoryview(damaged), FORMAT)
        (folder / "bad.h5").write_bytes(damaged)
        answer = process.run("read", "bad.h5")
        codes.append(answer.code)
        assert answer.code == 0 or (answer.code == 2 and len(answer.err.splitlines()) == 1), answer.err
    assert {0, 2} == set(codes)


@pytest.mark.parametrize(
    ("found", "words"),
    [
        (f"mcgeo-result/3 mcgeo 7.1 sha256 {'0' * 64}\n".encode(), "mcgeo-result/3, written by mcgeo 7.1"),
        (f"mcgeo-start/2 mcgeo 0.1.0 sha256 {'0' * 64}\n".encode(), "mcgeo-start/2"),
        (b"\x89HDF\r\n\x1a\n", "an HDF5 file that mcgeo did not write"),
        (b"state: {kind: laughlin}\n", "not a result file"),
        (f"mcgeo-result/{'9' * 300}".encode(), "not a result file"),
    ],
)
def test_other_formats_say_which_they_are(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], found: bytes, words: str
) -> None:
    path = tmp_path / "other.h5"
    path.write_bytes(found.ljust(BLOCK_SIZE, b"\0") + bytes(1000))
    assert main(["scan", str(path)]) == 2
    (line,) = capsys.readouterr().err.splitlines()
    assert words in line
    if "written by" in line:
        assert f"this is mcgeo {mcgeo.__version__}, which reads {FORMAT}" in line and "sample again" in line


def test_checkpoint_before_a_damaged_one_is_named_and_can_be_continued(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], liquid: bytes
) -> None:
    from mcgeo.runs import production

    monkeypatch.chdir(tmp_path)
    (tmp_path / "run.yaml").write_text(SMALL.replace("  seed: 5", "  seed: 5\n  checkpoint_seconds: 0"))
    advance, calls = production.next_block, []

    def next_block(*arguments: object) -> object:
        calls.append(None)
        if len(calls) == 6:
            raise KeyboardInterrupt
        return advance(*arguments)

    with monkeypatch.context() as patch:
        patch.setattr(production, "next_block", next_block)
        patch.setattr(production.SaveClock, "due", True)
        assert main(["sample", "run.yaml", "-q", "--out", "."]) == 130
    path = tmp_path / "liquid.h5"
    before, last = read_result(previous_file(path)).n_blocks, read_result(path).n_blocks
    assert 1 <= before == last - 1
    path.write_bytes(path.read_bytes()[:-1])
    capsys.readouterr()
    for command in ("scan", "sample"):
        assert main([command, "liquid.h5" if command == "scan" else "run.yaml", "--out", "."]) == 2
        (line,) = capsys.readouterr().err.splitlines()
        assert f"liquid.previous.h5 beside it is whole, with {before} of 8 blocks: rename it to liquid.h5" in line
    previous_file(path).rename(path)
    assert main(["sample", "run.yaml", "-q", "--out", "."]) == 0
    (tmp_path / "whole.h5").write_bytes(liquid)
    ended, whole = contents(path), contents(tmp_path / "whole.h5")
    # The interval between checkpoints stands in the configuration, and changes nothing else.
    assert ended.pop("config") != whole.pop("config")
    assert ended == whole
    assert not previous_file(path).exists()


def test_reading_gives_what_was_written(tmp_path: Path, liquid: bytes) -> None:
    (tmp_path / "a.h5").write_bytes(liquid)
    result = read_result(tmp_path / "a.h5")
    with h5py.File(tmp_path / "a.h5") as file:
        for name, values in {**result.blocks.means, **result.blocks.counts}.items():
            stored = file[f"blocks/{'means' if name in result.blocks.means else 'counts'}/{name}"]
            assert np.array_equal(stored[()], values)
        assert np.array_equal(file["checkpoint/0/words"][()], result.chains[0].walkers.words)
