"""The shipped catalogue: occupations of common liquids at two sizes, in one HDF5 file inside the package.

One group per liquid, named as in ``state.catalogue`` with ``_`` for ``/``; in it the groups ``large`` and ``small``,
one per size, each with the datasets ``m``, ``samples`` (c_m), ``q``, ``S``, ``S_error`` and, as attributes, where they
come from. ``scripts/make_catalogue.py`` makes the file.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass
from importlib.resources import as_file, files
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import StorageError
from mcgeo.estimate.statistics import JACKKNIFE_GROUPS
from mcgeo.estimate.structure_factor import Curve

Array = NDArray[np.float64]

FORMAT = "mcgeo-catalogue/1"
# With the two that carry the finite-size deviation they are as many as the jackknife's groups.
N_SAMPLES = JACKKNIFE_GROUPS - 2

_FILE = "catalogue.h5"
_LARGEST_M = 1000
_MOST_WAVES = 100_000
_LONGEST_TEXT = 100_000


@dataclass(frozen=True, eq=False)
class CatalogueRun:
    """One sampling behind an entry.

    Attributes
    ----------
    resolved : mapping
        Its configuration.
    mcgeo_version : str
    libraries : mapping of str to str
        Their versions.
    diagnostics : mapping
        As in the JSON output of ``sample``.
    m : ndarray of int64, shape (n_m,)
    samples : ndarray, shape (62, n_m)
        Independent samples of c_m.
    structure : Curve
        S(q) over waves of equal length, in the liquid's own metric.
    """

    resolved: Mapping[str, Any]
    mcgeo_version: str
    libraries: Mapping[str, str]
    diagnostics: Mapping[str, Any]
    m: NDArray[np.int64]
    samples: Array
    structure: Curve

    @property
    def n_electrons(self) -> int:
        """Electrons of the sampled state."""
        return int(self.resolved["state"]["electrons"])


@dataclass(frozen=True, eq=False)
class CatalogueEntry:
    """One liquid, sampled at two sizes.

    Attributes
    ----------
    label, filling, statistics : str
        Of the sampled liquid; the filling as text.
    large, small : CatalogueRun
    """

    label: str
    filling: str
    statistics: str
    large: CatalogueRun
    small: CatalogueRun


def group_name(name: str) -> str:
    """Name of the entry's group: without slashes, which would be groups in groups."""
    return name.replace("/", "_")


def write_entry(file: Any, name: str, entry: CatalogueEntry) -> None:
    """Add an entry to an open HDF5 file, without time stamps."""
    file.attrs["format"] = FORMAT
    group = file.create_group(group_name(name))
    group.attrs.update({"label": entry.label, "filling": entry.filling, "statistics": entry.statistics})
    for size in ("large", "small"):
        run: CatalogueRun = getattr(entry, size)
        place = group.create_group(size)
        place.attrs["config"] = json.dumps(run.resolved)
        place.attrs["mcgeo_version"] = run.mcgeo_version
        place.attrs["libraries"] = json.dumps(run.libraries)
        place.attrs["diagnostics"] = json.dumps(run.diagnostics)
        curve = run.structure
        arrays = {"m": run.m, "samples": run.samples, "q": curve.x, "S": curve.value, "S_error": curve.error}
        for key, values in arrays.items():
            place.create_dataset(key, data=values, track_times=False, fletcher32=True)


def read_entry(name: str, path: Path | None = None) -> CatalogueEntry:
    """An entry of the shipped catalogue, or of another file of its kind.

    Raises
    ------
    StorageError
        If the file is missing, damaged, of another format or without the entry.
    """
    if path is None:
        with as_file(files("mcgeo.runs") / _FILE) as shipped:
            return read_entry(name, shipped)
    if not path.is_file():
        raise StorageError(f"{path}: no such file; scripts/make_catalogue.py makes the catalogue")
    try:
        with h5py.File(path, "r") as file:
            found = file.attrs.get("format")
            if found != FORMAT:
                raise StorageError(f"{path}: not a catalogue of this version: format {found!r}, needed {FORMAT!r}")
            if group_name(name) not in file:
                raise StorageError(f"{path}: holds no {name}")
            return _entry(file[group_name(name)])
    except (OSError, KeyError, ValueError, TypeError, RuntimeError) as fault:
        raise StorageError(f"{path}: damaged or not a catalogue: {fault}") from fault


def _entry(group: Any) -> CatalogueEntry:
    label, filling, statistics = (_text(group, key) for key in ("label", "filling", "statistics"))
    return CatalogueEntry(label, filling, statistics, _run(group["large"]), _run(group["small"]))


def _run(place: Any) -> CatalogueRun:
    m = _array(place, "m", (_LARGEST_M,), "i")
    samples = _array(place, "samples", (N_SAMPLES, len(m)), "f")
    if len(samples) != N_SAMPLES or samples.shape[1] != len(m):
        raise ValueError(f"samples of shape {samples.shape} where {(N_SAMPLES, len(m))} is needed")
    x, value, error = (_array(place, key, (_MOST_WAVES,), "f") for key in ("q", "S", "S_error"))
    if not len(x) == len(value) == len(error):
        raise ValueError("q, S and S_error differ in length")
    return CatalogueRun(
        json.loads(_text(place, "config")),
        _text(place, "mcgeo_version"),
        json.loads(_text(place, "libraries")),
        json.loads(_text(place, "diagnostics")),
        m.astype(np.int64),
        samples,
        Curve(x, value, error),
    )


def _text(place: Any, key: str) -> str:
    text = place.attrs[key]
    if not isinstance(text, str) or len(text) > _LONGEST_TEXT:
        raise ValueError(f"attribute {key} is no text")
    return text


def _array(place: Any, key: str, limits: tuple[int, ...], kind: str) -> NDArray[Any]:
    """A dataset, read only if its type and shape are as they should be."""
    dataset = place[key]
    fits = len(dataset.shape) == len(limits) and all(n <= limit for n, limit in zip(dataset.shape, limits, strict=True))
    if dataset.dtype.kind != kind or dataset.dtype.itemsize != 8 or not fits:
        raise ValueError(f"{key} has type {dataset.dtype} and shape {dataset.shape}")
    values = dataset[()]
    if not np.all(np.isfinite(values)):
        raise ValueError(f"{key} holds numbers that are not finite")
    return np.asarray(values)
