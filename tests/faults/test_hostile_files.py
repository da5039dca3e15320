"""Result files made to harm, with a seal that fits: refused in one sentence, before memory is taken."""

from __future__ import annotations

import io
import json
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest

from mcgeo.runs.sizes import LARGEST_FILE
from tests.cli.conftest import ROOT
from tests.faults.child import Child
from tests.faults.conftest import Edit, forged

HUGE = 10**12
TRACE, STRUCTURE, PAIRS = "blocks/trace", "blocks/means/structure", "blocks/counts/pairs"


def replaced(name: str, **keywords: Any) -> Edit:
    """Another dataset in place of one."""

    def edit(file: h5py.File) -> None:
        attributes = dict(file[name].attrs) if name.startswith("checkpoint") else {}
        del file[name]
        file.create_dataset(name, **keywords).attrs.update(attributes)

    return edit


def removed(name: str) -> Edit:
    def edit(file: h5py.File) -> None:
        del file[name]

    return edit


def linked(name: str, link: object) -> Edit:
    def edit(file: h5py.File) -> None:
        del file[name]
        file[name] = link

    return edit


def changed(name: str, place: tuple[int, ...], value: float) -> Edit:
    def edit(file: h5py.File) -> None:
        file[name][place] = value

    return edit


def attribute(name: str, key: str, value: Any) -> Edit:
    def edit(file: h5py.File) -> None:
        file[name].attrs[key] = value

    return edit


def configured(change: Callable[[dict[str, Any]], None]) -> Edit:
    """Another configuration, blocks and all else as they were."""

    def edit(file: h5py.File) -> None:
        keys = json.loads(file["config"][()])
        change(keys)
        config_text(json.dumps(keys))(file)

    return edit


def config_text(text: str) -> Edit:
    def edit(file: h5py.File) -> None:
        del file["config"]
        data = text.encode()
        file.create_dataset("config", data=data, dtype=h5py.string_dtype("utf-8", len(data)))

    return edit


def setting(section: str, **values: Any) -> Edit:
    return configured(lambda keys: keys[section].update(values))


def virtual(file: h5py.File) -> None:
    """Blocks that are said to lie in another file."""
    shape = file[TRACE].shape
    layout = h5py.VirtualLayout(shape, dtype="<f8")
    layout[...] = h5py.VirtualSource("secret.h5", "numbers", shape)
    del file[TRACE]
    file.create_virtual_dataset(TRACE, layout)


def never_allocated(file: h5py.File) -> None:
    shape = file[TRACE].shape
    del file[TRACE]
    file.create_dataset(TRACE, shape, "<f8")


def user_filter(file: h5py.File) -> None:
    """Stored through a filter that no library here knows."""
    shape = file[TRACE].shape
    plist = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
    plist.set_chunk(shape)
    plist.set_filter(60001, h5py.h5z.FLAG_OPTIONAL, (1,))
    del file[TRACE]
    space, kind = h5py.h5s.create_simple(shape), h5py.h5t.IEEE_F64LE
    h5py.h5d.create(file.id, TRACE.encode(), kind, space, plist)


def group_for_dataset(file: h5py.File) -> None:
    del file[TRACE]
    file.create_group(TRACE)


def grown(name: str) -> Edit:
    """One group more."""

    def edit(file: h5py.File) -> None:
        file.create_group(name)

    return edit


def cycle(file: h5py.File) -> None:
    """A group that contains itself."""
    del file["blocks/means"]
    file["blocks/means"] = file["blocks"]


def poison_words(file: h5py.File) -> None:
    file["checkpoint/0/words"][0, :, 3] = 0


COMPOUND = np.zeros(8, dtype=[("a", "<f8"), ("b", "<i4")])
REFERENCES: dict[str, Any] = {"shape": (8,), "dtype": h5py.ref_dtype}

# fault -> words of the message; the exit code is 2 for each.
FAULTS: dict[str, tuple[Edit, str]] = {
    "10^12 doubles, chunked, never allocated": (
        replaced(STRUCTURE, shape=(HUGE,), dtype="<f8", chunks=(1000,)), "stored in pieces"),
    "10^12 doubles, in one piece": (replaced(STRUCTURE, shape=(HUGE,), dtype="<f8"), "has the shape"),
    "right shape, never allocated": (never_allocated, "holds no values"),
    "compressed": (replaced(TRACE, data=np.zeros(8), chunks=(8,), compression="gzip"), "stored in pieces"),
    "filter of a user": (user_filter, "stored in pieces"),
    "virtual dataset": (virtual, "stored in pieces"),
    "values in another file": (
        replaced(TRACE, shape=(8,), dtype="<f8", external=[("/etc/passwd", 0, 64)]), "stored in pieces"),
    "external link": (linked("blocks/means", h5py.ExternalLink("secret.h5", "/")), "is a link"),
    "external link to a dataset": (linked(TRACE, h5py.ExternalLink("secret.h5", "/numbers")), "is a link"),
    "soft link": (linked(TRACE, h5py.SoftLink("/blocks/accepted")), "is a link"),
    "dangling soft link": (linked("checkpoint", h5py.SoftLink("/nothing")), "is a link"),
    "group inside itself": (cycle, "structure is missing"),
    "single precision": (replaced(TRACE, data=np.zeros(8, "<f4")), "another type"),
    "whole numbers for floats": (replaced(TRACE, data=np.zeros(8, "<i8")), "another type"),
    "texts of any length": (
        replaced(TRACE, data=["x"] * 8, dtype=h5py.string_dtype()), "another type"),
    "arrays of any length": (
        replaced(TRACE, shape=(8,), dtype=h5py.vlen_dtype(np.float64)), "another type"),
    "compound": (replaced(TRACE, data=COMPOUND), "another type"),
    "references": (replaced(TRACE, **REFERENCES), "another type"),
    "opaque bytes": (replaced(TRACE, data=np.zeros(8, "V8")), "another type"),
    "group for a dataset": (group_for_dataset, "is not a dataset"),
    "dataset for a group": (replaced("blocks/means", data=np.zeros(3)), "is not a group"),
    "wrong rank": (replaced(TRACE, data=np.zeros((1, 8))), "has the shape"),
    "wrong shape of counts": (replaced(PAIRS, data=np.zeros((8, 8, 5), "<i8")), "has the shape"),
    "no dimension at all": (replaced(TRACE, data=1.0), "has the shape"),
    "empty dataset": (replaced(TRACE, data=h5py.Empty("<f8")), "has the shape"),
    "one block less in one place": (replaced("blocks/drift", data=np.zeros((1, 7))), "has the shape"),
    "blocks missing": (removed("blocks"), "/blocks is missing"),
    "structure factor missing": (removed(STRUCTURE), "structure is missing"),
    "checkpoint missing": (removed("checkpoint"), "/checkpoint is missing"),
    "generators missing": (removed("checkpoint/0/words"), "words is missing"),
    "configuration missing": (removed("config"), "/config is missing"),
    "parts nobody knows": (grown("payload"), "'payload'"),
    "a second component": (grown("checkpoint/1"), "2 chains"),
    "not a number in a block": (changed(STRUCTURE, (2, 3, 1), np.nan), "not finite"),
    "infinity in the trace": (changed(TRACE, (0, 1, 1, 1), -np.inf), "not finite"),
    "a walker that is nowhere": (changed("checkpoint/0/a", (0, 1, 1), np.nan), "not finite"),
    "a generator that stands still": (poison_words, "cannot be continued"),
    "negative counts": (changed(PAIRS, (1, 2, 3), -4), "negative counts"),
    "acceptance above one": (changed("blocks/accepted", (0, 1, 1), 1.5), "cannot be"),
    "attribute missing": (lambda file: file.attrs.__delitem__("seconds"), "seconds of / is missing"),
    "attribute of absurd size": (attribute("/", "seconds", np.zeros(8000)), "not one number"),
    "attribute that is a text": (attribute("/", "seconds", "1.0"), "not one number"),
    "time that ran backwards": (attribute("/", "seconds", -1.0), "cannot be"),
    "time that is none": (attribute("/", "seconds", np.nan), "not finite"),
    "step of nothing": (attribute("checkpoint/0", "step", 0.0), "cannot be continued"),
    "no blocks": (attribute("checkpoint/0", "blocks_done", 0), "holds 0 blocks"),
    "10^18 blocks": (attribute("checkpoint/0", "blocks_done", 10**18), "blocks; its configuration has 8"),
    "said to be finished before its time": (setting("sampling", sweeps=960, blocks=16), "cannot be"),
    "configuration that is no JSON": (config_text("state: {}"), "not JSON"),
    "configuration of another encoding": (
        replaced("config", data=np.bytes_(b"\xff\xfe{}")), "not UTF-8"),
    "configuration that is not a number": (config_text('{"state": NaN}'), "not JSON"),
    "configuration 10^5 deep": (config_text("[" * 100_000), "not JSON"),
    "configuration that is a list": (config_text("[]"), "configuration is not valid"),
    "configuration with a number of 10^5 digits": (config_text("1" * 100_000), "not JSON"),
    "configuration of a terabyte": (
        replaced("config", shape=(), dtype=f"S{2**31 - 1}"), "longer than"),
    "configuration of any length": (
        replaced("config", data="{}", dtype=h5py.string_dtype()), "fixed length"),
    "configuration that is not valid": (setting("state", exponent=-3), "state.exponent"),
    "configuration that reads a file": (
        setting("problem", interaction={"kind": "table", "file": "secret.csv"}), "configuration is not valid"),
    "configuration that looks up a material": (
        configured(lambda keys: keys.update(material={"name": "x", "file": "secret.yaml"})),
        "configuration is not valid"),
    "more electrons": (setting("state", electrons=5), "bytes for what"),
    "10^9 electrons": (setting("state", electrons=10**9), "configuration is not valid"),
    "more walkers": (setting("sampling", walkers=16), "bytes for what"),
    "10^15 walkers": (setting("sampling", walkers=10**15), "configuration is not valid"),
    "more waves": (setting("sampling", q_max=9.0), "bytes for what"),
    "fewer blocks": (setting("sampling", blocks=4, sweeps=240), "holds 8 blocks"),
    "longer blocks": (setting("sampling", sweeps=10**5), "bytes for what"),
    "a droplet": (configured(lambda keys: (keys.pop("cell"), keys.update(geometry={"kind": "disk"}))), "missing"),
}  # fmt: skip


@pytest.fixture(scope="module")
def child(tmp_path_factory: pytest.TempPathFactory, liquid: bytes) -> Iterator[tuple[Child, Path]]:
    folder = tmp_path_factory.mktemp("hostile")
    (folder / "good.h5").write_bytes(liquid)
    with h5py.File(folder / "secret.h5", "w") as file:
        file["numbers"] = np.zeros(8)
    for name in ("secret.csv", "secret.yaml"):
        (folder / name).write_text("a secret")
    with Child(folder) as process:
        # The first command loads the libraries; from then on memory is limited.
        assert process.run("sample", "good.h5", "-q", "--out", "out").code == 0
        yield process, folder


@pytest.mark.parametrize("fault", FAULTS)
def test_hostile_file_is_refused(child: tuple[Child, Path], liquid: bytes, fault: str) -> None:
    process, folder = child
    edit, words = FAULTS[fault]
    contents = forged(liquid, edit)
    (folder / "bad.h5").write_bytes(contents)
    answer = process.run("sample", "bad.h5", "--out", "nowhere")
    assert answer.code == 2 and answer.out == "", answer.err
    (line,) = answer.err.splitlines()
    assert line.startswith("bad.h5: ") and words in line
    assert len(line) < 400 and "secret" not in line.replace("'secret.csv'", "").replace("'secret.yaml'", "")
    for leaked in ("Errno", "h5py", "Traceback", "H5", "Unable to", "0x"):
        assert leaked not in line
    assert (folder / "bad.h5").read_bytes() == contents and not (folder / "nowhere").exists()


def test_forging_by_itself_is_not_what_is_refused(child: tuple[Child, Path], liquid: bytes) -> None:
    process, folder = child
    (folder / "same.h5").write_bytes(forged(liquid, lambda file: None))
    assert process.run("read", "same.h5").code == 0


def test_file_larger_than_memory_is_refused(child: tuple[Child, Path], liquid: bytes) -> None:
    """A terabyte of holes is not read to its end."""
    process, folder = child
    with open(folder / "sparse.h5", "wb") as file:
        file.write(liquid[:512])
        file.truncate(2 * LARGEST_FILE)
    answer = process.run("sample", "sparse.h5", "--out", "nowhere")
    assert answer.code == 2 and "larger than" in answer.err


def test_no_program_is_stored(liquid: bytes) -> None:
    """Nothing in a result file is pickled: no type that holds objects, no stream of the pickle protocol, no import."""
    with h5py.File(io.BytesIO(liquid)) as file:
        kinds: list[np.dtype[Any]] = []
        file.visititems(lambda name, item: kinds.append(item.dtype) if isinstance(item, h5py.Dataset) else None)
        assert len(kinds) > 8 and not any(kind.hasobject for kind in kinds)
        assert {kind.kind for kind in kinds} <= set("fiuS")
    for source in (ROOT / "mcgeo" / "runs").rglob("*.py"):
        for word in ("pickle", "marshal", "shelve", "allow_pickle", "joblib"):
            assert f"import {word}" not in source.read_text() and f"{word}=True" not in source.read_text()
