"""The result file: one HDF5 file per sampled liquid, written under another name and renamed when whole."""

from __future__ import annotations

import json
import os
import tempfile
from pathlib import Path
from typing import Any

import h5py
import numpy as np

import mcgeo
from mcgeo.errors import StorageError
from mcgeo.runs.liquid import Blocks, Liquid
from mcgeo.sampling.chain import ChainState
from mcgeo.sampling.walkers import WalkerArrays

FORMAT = "mcgeo-liquid/1"
RESULT_SUFFIX = ".h5"

_DIMENSIONS = {
    "structure": ("block", "walker", "wave"),
    "pair_counts": ("block", "walker", "bin"),
    "trace": ("component", "block", "walker", "measurement"),
    "accepted": ("component", "block", "walker"),
    "drift": ("component", "block"),
}


def _versions() -> dict[str, str]:
    from importlib.metadata import version

    return {name: version(name) for name in ("numpy", "numba", "scipy", "h5py")}


def write_liquid(path: Path, liquid: Liquid) -> None:
    """Write the file whole or not at all.

    Raises
    ------
    StorageError
        If it cannot be written; an older file under the same name is then untouched.
    """
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        handle, temporary = tempfile.mkstemp(prefix=f".{path.name}.", dir=path.parent)
        os.close(handle)
        try:
            with h5py.File(temporary, "w") as file:
                _fill(file, liquid)
            with open(temporary, "rb+") as written:
                os.fsync(written.fileno())
            os.chmod(temporary, 0o644)
            os.replace(temporary, path)
        finally:
            if os.path.exists(temporary):
                os.unlink(temporary)
    except OSError as fault:
        raise StorageError(f"{path}: cannot be written: {fault}") from fault


def _fill(file: Any, liquid: Liquid) -> None:
    file.attrs["format"] = FORMAT
    file.attrs["mcgeo_version"] = mcgeo.__version__
    file.attrs["libraries"] = json.dumps(_versions())
    file.attrs["config"] = json.dumps(liquid.resolved)
    file.attrs["seconds"] = liquid.seconds
    file.attrs["complete"] = liquid.complete
    waves = liquid.frame.waves(liquid.q_max)
    axes = file.create_group("axes")
    axes["wave"] = np.arange(len(waves.integers))
    axes["wave"].make_scale("wave")
    axes["integers"] = waves.integers
    axes["wavevectors"] = waves.vectors
    axes["wavevectors"].attrs["units"] = "1/l_B"
    group = file.create_group("blocks")
    for name, dimensions in _DIMENSIONS.items():
        dataset = group.create_dataset(name, data=getattr(liquid.blocks, name))
        for axis, dimension in enumerate(dimensions):
            dataset.dims[axis].label = dimension
            if dimension == "wave":
                dataset.dims[axis].attach_scale(axes["wave"])
    group["structure"].attrs["long_name"] = "S(q)"
    group["trace"].attrs["units"] = "e^2/(4 pi eps l_B)"
    for index, chain in enumerate(liquid.chains):
        place = file.create_group(f"checkpoint/{index}")
        place["a"], place["b"], place["words"] = chain.walkers.a, chain.walkers.b, chain.walkers.words
        place.attrs["step"] = chain.step
        place.attrs["blocks_done"] = chain.blocks_done


def read_liquid(path: Path) -> Liquid:
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
    except (OSError, KeyError, ValueError, TypeError) as fault:
        raise StorageError(f"{path}: damaged or not a result file: {fault}") from fault


def _contents(file: Any) -> Liquid:
    blocks = Blocks(**{name: file["blocks"][name][()] for name in _DIMENSIONS})
    chains = []
    for index in range(len(file["checkpoint"])):
        place = file["checkpoint"][str(index)]
        arrays = WalkerArrays(place["a"][()], place["b"][()], place["words"][()])
        chains.append(ChainState(arrays, float(place.attrs["step"]), int(place.attrs["blocks_done"])))
    return Liquid(
        json.loads(file.attrs["config"]),
        blocks,
        chains,
        float(file.attrs["seconds"]),
        bool(file.attrs["complete"]),
    )
