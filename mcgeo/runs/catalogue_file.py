"""The shipped catalogue: occupations of common liquids at two sizes, in one HDF5 file inside the package.

One group per liquid, named as in ``state.catalogue`` with ``_`` for ``/``; in it the groups ``large`` and ``small``,
one per size, each with the datasets ``m``, ``samples`` (c_m), ``free_errors``, ``q``, ``S``, ``S_error`` and where they
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

from mcgeo.estimate.statistics import JACKKNIFE_GROUPS
from mcgeo.estimate.structure_factor import Curve
from mcgeo.runs.checked_hdf5 import Unexpected, array, dataset, member, require_names, text
from mcgeo.runs.result_layout import FLOAT, INTEGER
from mcgeo.runs.state_config import CATALOGUE_NAMES
from mcgeo.runs.storage import opened_file, written_file

Array = NDArray[np.float64]

FORMAT = "mcgeo-catalogue/1"
# With the two that carry the finite-size deviation they are as many as the jackknife's groups.
N_SAMPLES = JACKKNIFE_GROUPS - 2

_FILE = "catalogue.h5"
_TEXTS = ("label", "filling", "statistics")
_SIZES = ("large", "small")
_MOST_M = 1000
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
    free_errors : ndarray, shape (n_m,)
        As in `mcgeo.estimate.occupations.PairOccupations`.
    structure : Curve
        S(q) over waves of equal length, in the liquid's own metric.
    """

    resolved: Mapping[str, Any]
    mcgeo_version: str
    libraries: Mapping[str, str]
    diagnostics: Mapping[str, Any]
    m: NDArray[np.int64]
    samples: Array
    free_errors: Array
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


def write_catalogue(path: Path, entries: Mapping[str, CatalogueEntry]) -> None:
    """Write entries by their names; the same entries give the same bytes.

    Raises
    ------
    StorageError
        If the file cannot be written; an older one is then untouched.
    """
    with written_file(path, FORMAT) as file:
        for name, entry in entries.items():
            group = file.create_group(group_name(name))
            for key in _TEXTS:
                _write_text(group, key, getattr(entry, key))
            for size in _SIZES:
                _write_run(group.create_group(size), getattr(entry, size))


def _write_run(place: Any, run: CatalogueRun) -> None:
    _write_text(place, "config", json.dumps(run.resolved))
    _write_text(place, "mcgeo_version", run.mcgeo_version)
    _write_text(place, "libraries", json.dumps(run.libraries))
    _write_text(place, "diagnostics", json.dumps(run.diagnostics))
    place.create_dataset("m", data=run.m, dtype=INTEGER)
    curve = run.structure
    arrays = {"samples": run.samples, "free_errors": run.free_errors, "q": curve.x, "S": curve.value}
    for key, values in {**arrays, "S_error": curve.error}.items():
        place.create_dataset(key, data=values, dtype=FLOAT)


def _write_text(group: Any, key: str, words: str) -> None:
    data = words.encode()
    group.create_dataset(key, data=data, dtype=h5py.string_dtype("utf-8", len(data)))


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
    with opened_file(path, FORMAT) as file:
        group = member(file, group_name(name), h5py.Group)
        require_names(group, (*_TEXTS, *_SIZES))
        label, filling, statistics = (text(group, key, _LONGEST_TEXT) for key in _TEXTS)
        large, small = (_run(member(group, size, h5py.Group)) for size in _SIZES)
        return CatalogueEntry(label, filling, statistics, large, small)


def held_names(path: Path) -> list[str]:
    """Which of the catalogue's names a file has entries of.

    Raises
    ------
    StorageError
        If the file is missing, damaged or of another format.
    """
    with opened_file(path, FORMAT) as file:
        return [name for name in CATALOGUE_NAMES if group_name(name) in file]


def _run(place: Any) -> CatalogueRun:
    m = array(place, "m", (_length(place, "m", _MOST_M),), INTEGER)
    n_waves = _length(place, "q", _MOST_WAVES)
    x, value, error = (array(place, key, (n_waves,), FLOAT) for key in ("q", "S", "S_error"))
    return CatalogueRun(
        json.loads(text(place, "config", _LONGEST_TEXT)),
        text(place, "mcgeo_version", _LONGEST_TEXT),
        json.loads(text(place, "libraries", _LONGEST_TEXT)),
        json.loads(text(place, "diagnostics", _LONGEST_TEXT)),
        m,
        array(place, "samples", (N_SAMPLES, len(m)), FLOAT),
        array(place, "free_errors", (len(m),), FLOAT),
        Curve(x, value, error),
    )


def _length(place: Any, key: str, most: int) -> int:
    shape = dataset(place, key).shape
    if len(shape) != 1 or not 1 <= shape[0] <= most:
        raise Unexpected(f"{key} has the shape {shape}")
    return int(shape[0])
