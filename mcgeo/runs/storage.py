"""The result file: one HDF5 file per sampled liquid, written under another name and renamed when whole."""

from __future__ import annotations

import json
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import h5py

import mcgeo
from mcgeo.errors import StorageError
from mcgeo.runs.atomic import whole_file
from mcgeo.runs.experiment import result_class
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.sampled import Blocks, Sampled
from mcgeo.sampling.chain import ChainState
from mcgeo.sampling.walkers import WalkerArrays

FORMAT = "mcgeo-result/1"
RESULT_SUFFIX = ".h5"

def _versions() -> dict[str, str]:
    from importlib.metadata import version

    return {name: version(name) for name in ("numpy", "numba", "scipy", "h5py")}


def write_result(path: Path, result: Sampled) -> None:
    """Write the file whole or not at all.

    Raises
    ------
    StorageError
        If it cannot be written; an older file under the same name is then untouched.
    """
    with written_file(path) as file:
        _fill(file, result)


@contextmanager
def written_file(path: Path) -> Iterator[Any]:
    """An HDF5 file to be filled, there whole or not at all.

    Raises
    ------
    StorageError
        If it cannot be written; an older file under the same name is then untouched.
    """
    try:
        with whole_file(path) as temporary, h5py.File(temporary, "w") as file:
            yield file
    except OSError as fault:
        raise StorageError(f"{path}: cannot be written: {fault}") from fault


def _fill(file: Any, result: Sampled) -> None:
    file.attrs["format"] = FORMAT
    file.attrs["mcgeo_version"] = mcgeo.__version__
    file.attrs["libraries"] = json.dumps(_versions())
    file.attrs["config"] = json.dumps(result.resolved)
    file.attrs["seconds"] = result.seconds
    file.attrs["complete"] = result.complete
    axes = file.create_group("axes")
    for name, (values, unit) in result.axes.items():
        axes[name] = values
        axes[name].attrs["units"] = unit
        axes[name].make_scale(name)
    blocks = result.blocks
    arrays: dict[str, Any] = {f"means/{name}": values for name, values in blocks.means.items()}
    arrays |= {f"counts/{name}": values for name, values in blocks.counts.items()}
    for name, values in arrays.items():
        _labelled(file.create_dataset(f"blocks/{name}", data=values), ("block", "walker"))
    for name, (dataset, axis) in result.scaled_axes.items():
        file[f"blocks/{dataset}"].dims[axis].attach_scale(axes[name])
    trace = file.create_dataset("blocks/trace", data=blocks.trace)
    trace.attrs["units"] = "e^2/(4 pi eps l_B)"
    _labelled(trace, ("component", "block", "walker", "measurement"))
    _labelled(file.create_dataset("blocks/accepted", data=blocks.accepted), ("component", "block", "walker"))
    _labelled(file.create_dataset("blocks/drift", data=blocks.drift), ("component", "block"))
    write_chains(file, result.chains)


def write_chains(file: Any, chains: Sequence[ChainState]) -> None:
    """All that is needed to continue."""
    for index, chain in enumerate(chains):
        place = file.create_group(f"checkpoint/{index}")
        place["a"], place["b"], place["words"] = chain.walkers.a, chain.walkers.b, chain.walkers.words
        place.attrs["step"] = chain.step
        place.attrs["blocks_done"] = chain.blocks_done


def _labelled(dataset: Any, labels: tuple[str, ...]) -> None:
    for axis, label in enumerate(labels):
        dataset.dims[axis].label = label


def read_result(path: Path) -> Sampled:
    """Read a result file.

    Raises
    ------
    StorageError
        If the file is missing, cut off, of another kind or of another version.
    """
    if not path.is_file():
        raise StorageError(f"{path}: no such file")
    try:
        with h5py.File(path, "r") as file:
            found = file.attrs.get("format")
            if found != FORMAT:
                raise StorageError(f"{path}: not a result file of this version: format {found!r}, needed {FORMAT!r}")
            return _contents(file)
    except (OSError, KeyError, ValueError, TypeError, RuntimeError) as fault:
        raise StorageError(f"{path}: damaged or not a result file: {fault}") from fault


def _contents(file: Any) -> Sampled:
    stored = file["blocks"]
    blocks = Blocks(
        {name: stored["means"][name][()] for name in stored["means"]},
        {name: stored["counts"][name][()] for name in stored["counts"]},
        stored["trace"][()],
        stored["accepted"][()],
        stored["drift"][()],
    )
    resolved = json.loads(file.attrs["config"])
    seconds, complete = float(file.attrs["seconds"]), bool(file.attrs["complete"])
    return result_class(resolved)(resolved, blocks, read_chains(file), seconds, complete)


def read_chains(file: Any) -> list[ChainState]:
    """What `write_chains` has written."""
    chains = []
    for index in range(len(file["checkpoint"])):
        place = file["checkpoint"][str(index)]
        arrays = WalkerArrays(place["a"][()], place["b"][()], place["words"][()])
        chains.append(ChainState(arrays, float(place.attrs["step"]), int(place.attrs["blocks_done"])))
    return chains


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
