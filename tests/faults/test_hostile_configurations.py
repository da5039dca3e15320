"""Configurations made to harm, and files that are none: one plain line with its place, in bounded time and memory."""

from __future__ import annotations

import os
import re
from collections.abc import Iterator
from pathlib import Path

import pytest

from mcgeo.problem.finite_width import Softened
from tests.cli.conftest import Answer
from tests.faults.child import Child
from tests.unit.test_interaction_table import isotropic_text

STATE = "state: {kind: laughlin, exponent: 3, electrons: 4}\n"
LONG = "k" * 900_000
LAUGHS = "".join(f"{b}: &{b} [*{a}, *{a}, *{a}, *{a}, *{a}, *{a}, *{a}, *{a}, *{a}]\n" for a, b in zip("abcdefgh", "bcdefghi", strict=True))  # noqa: E501
SIZE = "larger than 1 MB"
MANY = "more than 20000 keys and values"
TABLE = "problem: {interaction: {kind: table, file: §}}\n"
HEADER = "q [1/l_B], V [e^2 l_B/(4 pi eps)]\n"

# fault -> content, place, words of the message; the exit code is 2 for each. None: the file has no place.
FAULTS: dict[str, tuple[str | bytes, str | None, str]] = {
    "a billion laughs": ("a: &a [x]\n" + LAUGHS, "1:4", "anchors are not allowed (&a)"),
    "an anchor that holds itself": ("a: &a [*a]\n", "1:4", "anchors are not allowed"),
    "merged groups": (STATE + "<<: *x\n", "2:5", "aliases are not allowed"),
    "10^5 brackets": ("[" * 100_000, "1:21", "nested deeper than 20"),
    "10^5 questions": ("? " * 100_000, "1:41", "nested deeper than 20"),
    "3 10^5 empty lists": (f"a: [{'[],' * 300_000}]\n", "1:59996", MANY),
    "10^5 keys": ("".join(f"k{i}: 1\n" for i in range(90_000)), "10000:8", MANY),
    "one key 2 10^5 times": ("a: 1\n" * 190_000, "10000:4", MANY),
    "a key of a megabyte": (f"{STATE}? {LONG}\n: 1\n", "2:3", "kkk...: unknown key"),
    "a text of a megabyte": (f"state: {{kind: {LONG}}}\n", "1:15", "must be one of"),
    "a name of a megabyte": (f"{STATE}material: {{name: {LONG}, field_tesla: 2}}\n", "2:18", "must be one of"),
    "a file name of a megabyte": (STATE + TABLE.replace("§", LONG), "2:44", "kkk"),
    "a number of 10^5 digits": (STATE.replace("4", "9" * 100_000), "1:49", "must be a whole number"),
    "a fraction of 10^5 digits": (
        f"state: {{kind: moore_read, filling: {'1' * 100_000}/2, electrons: 4}}\n", "1:36", "must be one of 1/2, 1"),
    "10^400": (STATE.replace("4", "1e400"), "1:49", "must be a whole number"),
    "an exponent of 10^5 digits": (STATE.replace("4", f"1e{'9' * 100_000}"), "1:49", "must be a whole number"),
    "infinity": (STATE + "problem: {mass: {ratio: .inf}}\n", "2:25", "must be a finite number"),
    "not a number": (STATE + "problem: {mass: {ratio: .nan}}\n", "2:25", "must be a finite number"),
    "10^18 electrons": (STATE.replace("4", "1" + 18 * "0"), "1:49", "from 2 to 10000"),
    "10^15 walkers": (STATE + "sampling: {walkers: 1000000000000000}\n", "2:1", "at most 8 work"),
    "10^15 blocks": (STATE + "sampling: {blocks: 1e15, sweeps: 1e15}\n", "2:1", "at most 8 work"),
    "10^9 points": (STATE + "scan: {stretch: {points: 1e9}}\n", "2:26", "from 3 to 10000"),
    "a date": (STATE + "sampling: {seed: 2026-01-31}\n", "2:18", "not '2026-01-31'"),
    "a time stamp": ("state: 2026-01-31T12:00:00Z\n", "1:8", "must be a group of keys"),
    "a set": (STATE + "a: !!set {b, c}\n", "2:1", "a: unknown key"),
    "an ordered map": (STATE + "cell: !!omap [a: 1]\n", "2:7", "tags are not allowed"),
    "a program": ("state: !!python/object/apply:os.system ['touch harm']\n", "1:8", "tags are not allowed"),
    "binary data": (STATE + "cell: !!binary aGFybQ==\n", "2:7", "tags are not allowed"),
    "two documents": (STATE + "---\n" + STATE, "2:1", "a second document"),
    "10^5 documents": ("---\n" * 100_000, "2:1", "a second document"),
    "tabs": ("state:\n\tkind: laughlin\n", "2:1", "a tab cannot indent"),
    "a NUL byte": (STATE + "a: \0\n", "2:4", "U+0000 is not allowed"),
    "a program file": (b"\x7fELF\x02\x01\x01" + bytes(range(128)), "1:1", "U+007F is not allowed"),
    "UTF-16": (STATE.encode("utf-16"), "1:1", "not UTF-8 text"),
    "UTF-32": (STATE.encode("utf-32-be"), "1:1", "U+0000 is not allowed"),
    "Latin 1": (STATE.encode() + b"# \xe9\n", "2:3", "not UTF-8 text"),
    "two bytes short of a letter": (STATE.encode() + b"# \xe2\x82", "2:3", "not UTF-8 text"),
    "a huge file": (STATE + "#" * 2_000_000, None, SIZE),
    "nothing": ("", "1:1", "the file is empty"),
    "a table outside": (STATE + TABLE.replace("§", "../v.csv"), "2:44", "inside the folder"),
    "a table from the root": (STATE + TABLE.replace("§", "/etc/passwd"), "2:44", "inside the folder"),
    "a table through a link": (STATE + TABLE.replace("§", "link.csv"), "2:44", "links out of it"),
    "a table through a linked folder": (STATE + TABLE.replace("§", "sub/v.csv"), "2:44", "links out of it"),
    "materials outside": (STATE + "material: {file: ../m.yaml, name: x}\n", "2:18", "inside the folder"),
    "a table that is a pipe": (STATE + TABLE.replace("§", "pipe.csv"), "2:44", "a pipe or device"),
    "a table that is a folder": (STATE + TABLE.replace("§", "folder"), "2:44", "cannot be read: Is a directory"),
    "a table that is not there": (STATE + TABLE.replace("§", "no.csv"), "2:44", "there is no such file"),
    "a table without an end": (STATE + TABLE.replace("§", "huge.csv"), "2:44", "larger than 4 MB"),
    "a table of bytes": (STATE + TABLE.replace("§", "binary.csv"), "2:44", "not UTF-8 text"),
    "a table that is not of numbers": (STATE + TABLE.replace("§", "nan.csv"), "2:44", "line 3: must hold 2 finite"),
    "a ragged table": (STATE + TABLE.replace("§", "ragged.csv"), "2:44", "line 3: must hold 2 finite"),
    "a table with another header": (STATE + TABLE.replace("§", "header.csv"), "2:44", "the header must be"),
    "a table of one line of a megabyte": (STATE + TABLE.replace("§", "line.csv"), "2:44", "the header must be"),
}  # fmt: skip


def _others(folder: Path) -> None:
    """What the configurations name."""
    (folder.parent / "v.csv").write_text("a secret")
    (folder / "link.csv").symlink_to("../v.csv")
    (folder / "sub").symlink_to("..")
    os.mkfifo(folder / "pipe.csv")
    (folder / "folder").mkdir()
    (folder / "huge.csv").write_bytes(b"1, 2\n" * 1_000_000)
    (folder / "binary.csv").write_bytes(bytes(range(256)))
    (folder / "nan.csv").write_text(HEADER + "0.1, 1\n0.2, nan\n")
    (folder / "ragged.csv").write_text(HEADER + "0.1, 1\n0.2\n")
    (folder / "header.csv").write_text("q, V\n0.1, 1\n")
    (folder / "line.csv").write_text("x" * 3_000_000)


@pytest.fixture(scope="module")
def child(tmp_path_factory: pytest.TempPathFactory) -> Iterator[tuple[Child, Path]]:
    folder = tmp_path_factory.mktemp("hostile") / "configs"
    folder.mkdir()
    _others(folder)
    (folder / "good.yaml").write_text(STATE)
    with Child(folder) as process:
        assert process.run("check", "good.yaml").code == 0
        yield process, folder


def refused(answer: Answer, name: str, place: str | None, words: str) -> None:
    """The answer is a refusal: each line with its place, none of them long, none said twice."""
    assert answer.code == 2 and answer.out == "", answer.err
    lines = answer.err.splitlines()
    assert 1 <= len(lines) <= 51 and len(set(lines)) == len(lines)
    pattern = rf"{re.escape(name)}: \S" if place is None else rf"{re.escape(name)}:[1-9]\d*:[1-9]\d*: \S"
    assert all(re.match(pattern, line) and len(line) < 1300 for line in lines), lines
    assert place is None or lines[0].startswith(f"{name}:{place}: ")
    assert words in lines[0]


@pytest.mark.parametrize("fault", FAULTS)
def test_hostile_configuration_is_refused(child: tuple[Child, Path], fault: str) -> None:
    process, folder = child
    content, place, words = FAULTS[fault]
    (folder / "run.yaml").write_bytes(content.encode() if isinstance(content, str) else content)
    before = sorted(folder.iterdir())
    refused(process.run("check", "run.yaml"), "run.yaml", place, words)
    assert sorted(folder.iterdir()) == before


def test_many_faults_are_counted(child: tuple[Child, Path]) -> None:
    process, folder = child
    (folder / "run.yaml").write_text(STATE + "".join(f"k{i}: 1\n" for i in range(1000)))
    assert process.run("check", "run.yaml").err.splitlines()[-1] == "run.yaml:52:1: 950 more faults from here on"


@pytest.mark.parametrize("command", [("check",), ("sample",), ("scan",), ("plot", "energy")])
@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("pipe.csv", "a pipe or device and not a file"),
        ("/dev/zero", "a pipe or device and not a file"),
        ("/dev/stdin", "a pipe or device and not a file"),
        ("-", "there is no such file"),
        ("folder", ""),
    ],
)
def test_what_is_no_file_is_not_read(
    child: tuple[Child, Path], command: tuple[str, ...], name: str, words: str
) -> None:
    process, folder = child
    before = sorted(folder.iterdir())
    answer = process.run(*command, name)
    assert answer.code == 2 and answer.out == "" and len(answer.err.splitlines()) == 1
    assert name in answer.err
    assert command[0] == "plot" or words in answer.err
    assert sorted(folder.iterdir()) == before


def test_windows_line_ends_and_a_byte_order_mark_are_read(child: tuple[Child, Path]) -> None:
    process, folder = child
    (folder / "run.yaml").write_bytes(b"\xef\xbb\xbf" + STATE.replace("\n", "\r\n").encode())
    assert process.run("check", "run.yaml").code == 0


@pytest.mark.parametrize("name", ["../v.csv", "link.csv", "sub/v.csv", "§/v.csv"])
def test_files_outside_are_read_where_the_user_says_so(child: tuple[Child, Path], name: str) -> None:
    process, folder = child
    secret = (folder.parent / "v.csv").read_text()
    try:
        (folder.parent / "v.csv").write_text(isotropic_text(Softened(1.0).radial))
        (folder / "run.yaml").write_text(STATE + TABLE.replace("§", name.replace("§", str(folder.parent))))
        assert process.run("check", "run.yaml").code == 2
        assert process.run("check", "run.yaml", "--allow-outside").code == 0
    finally:
        (folder.parent / "v.csv").write_text(secret)
