"""The result file: one HDF5 file per sampled liquid, made in memory, sealed, and renamed into place when whole.

While a run is not finished, the file before the last is kept as ``NAME.previous.h5``; a finished run leaves one file.
"""

from __future__ import annotations

import io
import json
import os
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import Any

import h5py

import mcgeo
from mcgeo.errors import StorageError
from mcgeo.runs.atomic import write_whole
from mcgeo.runs.checked_hdf5 import Unexpected
from mcgeo.runs.ending import blocks_of
from mcgeo.runs.experiment import result_class
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.processor import processor
from mcgeo.runs.result_layout import FLAG, FLOAT, INTEGER, LONGEST_CONFIG, WORD, read_config, read_contents
from mcgeo.runs.sampled import Sampled
from mcgeo.runs.seal import BLOCK_SIZE, check_seal, seal
from mcgeo.runs.sizes import LARGEST_FILE
from mcgeo.sampling.chain import ChainState

FORMAT = "mcgeo-result/2"
RESULT_SUFFIX = ".h5"

# What the library raises on bytes that make no sense to it.
_HDF5_FAULTS = (OSError, KeyError, ValueError, TypeError, RuntimeError, OverflowError, NotImplementedError)


def _versions() -> dict[str, str]:
    from importlib.metadata import version

    return {name: version(name) for name in ("numpy", "numba", "scipy", "h5py")}


def previous_file(path: Path) -> Path:
    """Where the file before the last is kept while a run is not finished."""
    return path.with_name(f"{path.stem}.previous{path.suffix}")


def write_result(path: Path, result: Sampled) -> None:
    """Write the file whole or not at all.

    Raises
    ------
    StorageError
        If it cannot be written; an older file under the same name is then untouched.
    """
    previous = previous_file(path)
    if not result.complete:
        _keep(path, previous)
    with written_file(path, FORMAT) as file:
        _fill(file, result)
    if result.complete:
        with suppress(OSError):
            previous.unlink(missing_ok=True)


@contextmanager
def written_file(path: Path, file_format: str) -> Iterator[Any]:
    """An HDF5 file to be filled, made in memory, sealed, and there whole or not at all.

    Raises
    ------
    StorageError
        If it cannot be written; an older file under the same name is then untouched.
    """
    buffer = io.BytesIO()
    with h5py.File(buffer, "w", userblock_size=BLOCK_SIZE) as file:
        yield file
    contents = buffer.getbuffer()
    seal(contents, file_format)
    try:
        write_whole(path, contents)
    except OSError as fault:
        kept = "; what it held before is kept, and the same command goes on from there" if path.is_file() else ""
        raise StorageError(f"{path}: cannot be written: {fault.strerror or fault}{kept}") from fault


def _keep(path: Path, previous: Path) -> None:
    """A second name for the present file, where the file system has second names; no copy is made."""
    with suppress(OSError):
        if path.is_file():
            previous.unlink(missing_ok=True)
            os.link(path, previous)


def _fill(file: Any, result: Sampled) -> None:
    file.attrs["format"] = FORMAT
    file.attrs["mcgeo_version"] = mcgeo.__version__
    file.attrs["libraries"] = json.dumps(_versions())
    file.attrs["processor"] = json.dumps(processor())
    file.attrs.create("seconds", result.seconds, dtype=FLOAT)
    file.attrs.create("complete", result.complete, dtype=FLAG)
    write_config(file, result.resolved)
    axes = file.create_group("axes")
    for name, (values, unit) in result.axes.items():
        axes[name] = values
        axes[name].attrs["units"] = unit
        axes[name].make_scale(name)
    blocks = file.create_group("blocks")
    for kind, arrays, dtype in (("means", result.blocks.means, FLOAT), ("counts", result.blocks.counts, INTEGER)):
        for name, values in arrays.items():
            _labelled(blocks.create_dataset(f"{kind}/{name}", data=values, dtype=dtype), ("block", "walker"))
    for name, (dataset, axis) in result.scaled_axes.items():
        blocks[dataset].dims[axis].attach_scale(axes[name])
    trace = blocks.create_dataset("trace", data=result.blocks.trace, dtype=FLOAT)
    trace.attrs["units"] = "e^2/(4 pi eps l_B)"
    _labelled(trace, ("component", "block", "walker", "measurement"))
    accepted = blocks.create_dataset("accepted", data=result.blocks.accepted, dtype=FLOAT)
    _labelled(accepted, ("component", "block", "walker"))
    _labelled(blocks.create_dataset("drift", data=result.blocks.drift, dtype=FLOAT), ("component", "block"))
    write_chains(file, result.chains)


def write_chains(file: Any, chains: Sequence[ChainState]) -> None:
    """All that is needed to continue."""
    for index, chain in enumerate(chains):
        place = file.create_group(f"checkpoint/{index}")
        walkers = chain.walkers
        for name, values, dtype in (("a", walkers.a, FLOAT), ("b", walkers.b, FLOAT), ("words", walkers.words, WORD)):
            place.create_dataset(name, data=values, dtype=dtype)
        place.attrs.create("step", chain.step, dtype=FLOAT)
        place.attrs.create("blocks_done", chain.blocks_done, dtype=INTEGER)


def write_config(file: Any, keys: Mapping[str, Any]) -> None:
    """Keys of a configuration as one JSON text of fixed length."""
    config = json.dumps(keys, allow_nan=False).encode()
    if len(config) > LONGEST_CONFIG:
        raise StorageError(f"configuration and tables take {len(config)} bytes, at most {LONGEST_CONFIG} work")
    file.create_dataset("config", data=config, dtype=h5py.string_dtype("utf-8", len(config)))


def _labelled(dataset: Any, labels: tuple[str, ...]) -> None:
    for axis, label in enumerate(labels):
        dataset.dims[axis].label = label


def read_result(path: Path) -> Sampled:
    """Read a result file.

    Raises
    ------
    StorageError
        If the file is missing, damaged, of another kind or of another format, in one sentence.
    """
    try:
        with opened_file(path, FORMAT) as file:
            keys = read_config(file)
            return result_class(keys)(keys, *read_contents(file, keys, path.stat().st_size))
    except StorageError as fault:
        raise StorageError(f"{fault}{_advice(path)}") from fault


@contextmanager
def opened_file(path: Path, file_format: str) -> Iterator[h5py.File]:
    """A file that `written_file` wrote, to be read within the context by `mcgeo.runs.checked_hdf5`.

    Nothing of it is believed: see `mcgeo.runs.seal` for damage, `mcgeo.runs.checked_hdf5` for what was made to harm.

    Raises
    ------
    StorageError
        If the file is missing, damaged, of another kind or of another format, in one sentence.
    """
    if not path.is_file():
        raise StorageError(f"{path}: {'not a file' if path.exists() else 'no such file'}")
    try:
        with open(path, "rb") as raw:
            check_seal(raw, file_format, str(path), LARGEST_FILE)
            with h5py.File(raw, "r") as file:
                yield file
    except Unexpected as fault:
        raise StorageError(f"{path}: not a result file that mcgeo wrote: {fault}") from None
    except PermissionError as fault:
        raise StorageError(f"{path}: cannot be read: {fault.strerror}") from None
    except _HDF5_FAULTS as fault:
        raise StorageError(f"{path}: not a result file that mcgeo wrote: it cannot be read as HDF5") from fault
    except MemoryError:
        raise StorageError(f"{path}: does not fit into the memory of this machine") from None


def _advice(path: Path) -> str:
    """What to do about a file that cannot be read, where an earlier one of the same run is left."""
    previous = previous_file(path)
    if not previous.is_file():
        return ""
    with suppress(StorageError):
        earlier = read_result(previous)
        found = f"{previous.name} beside it is whole, with {blocks_of(earlier)}"
        return f"; {found}: rename it to {path.name} and the same command goes on"
    return ""


def as_liquid(result: Sampled, path: Path) -> Liquid:
    """The result, which must be a liquid on the torus.

    Raises
    ------
    StorageError
        If it is a droplet.
    """
    if not isinstance(result, Liquid):
        raise StorageError(f"{path} holds a droplet; this needs a liquid on the torus")
    return result
