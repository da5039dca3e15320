"""``sweep.h5``: the table of a sweep as a grid with labelled axes, after the netCDF rules that xarray reads.

One dimension per axis, named by its first key. Swept keys are coordinates, those that change together with the first
beside it; every result is an array over the grid, NaN (text: empty) where a point is excluded, failed or missing.
"""

from __future__ import annotations

import io
import json
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

import mcgeo
from mcgeo.errors import StorageError
from mcgeo.runs.atomic import write_whole
from mcgeo.runs.sweep_table import SweepTable, SweptColumn, unit_of

FORMAT = "mcgeo-sweep/1"

# Arrays beyond this many entries are compressed.
_LARGE = 10_000


def sweep_file_bytes(table: SweepTable) -> bytes:
    """The content of the file."""
    stream = io.BytesIO()
    with h5py.File(stream, "w", track_order=True) as file:
        file.attrs["format"] = FORMAT
        file.attrs["mcgeo_version"] = mcgeo.__version__
        file.attrs["config"] = json.dumps(table.config)
        scales = [_axis(file, axis, spacing) for axis, spacing in zip(table.axes, table.spacings, strict=True)]
        beside = " ".join(column.name for axis in table.axes for column in axis[1:])
        grids = {name: _on_grid(table, values) for name, values in {"status": table.status, **table.columns}.items()}
        for name, values in grids.items():
            dataset = _dataset(file, name, values)
            dataset.attrs["units"] = unit_of(name)
            if beside:
                dataset.attrs["coordinates"] = beside
            for dimension, scale in enumerate(scales):
                dataset.dims[dimension].attach_scale(scale)
    return stream.getvalue()


def write_sweep_file(path: Path, table: SweepTable) -> None:
    """Write the file whole or not at all.

    Raises
    ------
    StorageError
        If it cannot be written.
    """
    try:
        write_whole(path, sweep_file_bytes(table))
    except OSError as fault:
        raise StorageError(f"{path}: cannot be written: {fault.strerror or fault}") from fault


def _axis(file: Any, columns: Sequence[SweptColumn], spacing: str) -> Any:
    """The dimension scale of an axis, with the other keys along it."""
    first, *others = [_dataset(file, column.name, column.values) for column in columns]
    first.make_scale(columns[0].name)
    first.attrs["spacing"] = spacing
    for column, dataset in zip(columns, (first, *others), strict=True):
        dataset.attrs["units"] = column.unit
    for dataset in others:
        dataset.dims[0].attach_scale(first)
    return first


def _dataset(file: Any, name: str, values: NDArray[Any]) -> Any:
    options = {"compression": "gzip", "shuffle": True} if values.size > _LARGE else {}
    if values.dtype.kind in "OU":
        return file.create_dataset(name, data=values.astype(object), dtype=h5py.string_dtype(), **options)
    return file.create_dataset(name, data=values, **options)


def _on_grid(table: SweepTable, values: NDArray[Any]) -> NDArray[Any]:
    kind = values.dtype.kind
    empty = "" if kind in "OU" else -1 if kind == "i" else np.nan
    grid = np.full(int(np.prod(table.shape)), empty, dtype=object if kind in "OU" else values.dtype)
    grid[table.positions] = values
    return grid.reshape(table.shape)
