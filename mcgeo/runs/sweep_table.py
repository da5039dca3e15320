"""The table of a sweep: one row per point, swept keys and optimum, each column with its unit."""

from __future__ import annotations

import json
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from mcgeo.runs.config import json_schema
from mcgeo.runs.sweep_plan import SweepPlan
from mcgeo.runs.sweep_rows import row_files
from mcgeo.runs.yaml_source import Path as KeyPath

DONE, FAILED, MISSING = "done", "failed", "missing"

_PER_ELECTRON = "e^2/(4 pi eps l_B) per electron"
_ENDINGS = {
    "_degrees": "degrees",
    "_mev": "meV per electron",
    "_kelvin": "K per electron",
    "_mev_per_nm2": "meV/nm^2",
    "_nm": "nm",
    "_tesla": "T",
    "_per_cm2": "1/cm^2",
}
_UNITS = {
    "angle_error": "degrees",
    "orbit_angle_error": "degrees",
    "coulomb_energy_mev": "meV",
    "coulomb_energy_kelvin": "K",
    "cyclotron_energy_mev": "meV",
    "autocorrelation_time": "sweeps",
    "cyclotron_mass": "free-electron masses",
}
_ENERGIES = ("energy", "gain_", "stiffness", "isotropic_stiffness")
_NO_SEED = -1
_WITH_ERRORS = (
    "stretch",
    "angle",
    "aspect_ratio",
    "energy",
    "gain_isotropic",
    "gain_mass",
    "stiffness_along",
    "stiffness_across",
    "isotropic_stiffness",
    "response",
    "orbit_stretch",
    "orbit_angle",
)
# Columns in the order of the table; others follow in the order of the alphabet.
_FIRST = (
    *(name for quantity in _WITH_ERRORS for name in (quantity, f"{quantity}_degrees", f"{quantity}_error")),
    "interior",
    "shape_verdict",
    "run_verdict",
    "mass_stretch",
    "mass_angle_degrees",
    "orbit_aspect_ratio",
    "interaction_name",
    "level",
    "label",
    "filling",
    "electrons",
)


def unit_of(column: str) -> str:
    """Unit of a column of results; 1 for plain numbers and words."""
    if column in _UNITS:
        return _UNITS[column]
    name = column.removesuffix("_error")
    for ending, unit in _ENDINGS.items():
        if name.endswith(ending):
            return unit
    return _PER_ELECTRON if name.startswith(_ENERGIES) else "1"


def unit_of_key(path: KeyPath) -> str:
    """Unit of a key of the configuration, out of its description; 1 where it has none, as a group of keys."""
    schema = _schema()
    units = {
        match[1]
        for field in _fields(schema, schema, path)
        if (match := re.search(r"\[([^\[\]]+)\]\.$", str(field.get("description", ""))))
    }
    return units.pop() if len(units) == 1 else "1"


@cache
def _schema() -> dict[str, Any]:
    return json_schema()


def _fields(field: Mapping[str, Any], root: Mapping[str, Any], path: KeyPath) -> Iterator[Mapping[str, Any]]:
    """Every form of the field at a path."""
    if not path:
        yield field
        return
    if "$ref" in field:
        yield from _fields(root["$defs"][field["$ref"].rpartition("/")[2]], root, path)
    for form in (*field.get("anyOf", ()), *field.get("oneOf", ())):
        yield from _fields(form, root, path)
    step = path[0]
    if isinstance(step, int):
        inner = field.get("items") or (field.get("prefixItems") or (None,))[0]
        if inner:
            yield from _fields({"description": field.get("description", ""), **inner}, root, path[1:])
    elif step in field.get("properties", {}):
        yield from _fields(field["properties"][step], root, path[1:])
    elif isinstance(field.get("additionalProperties"), Mapping):
        inner = {"description": field.get("description", ""), **field["additionalProperties"]}
        yield from _fields(inner, root, path[1:])


@dataclass(frozen=True)
class SweptColumn:
    """Values of a swept key along its axis.

    Attributes
    ----------
    name, unit : str
    values : ndarray, shape (n,)
        Numbers, or text where a value is none.
    """

    name: str
    unit: str
    values: NDArray[Any]


@dataclass(frozen=True, eq=False)
class SweepTable:
    """A sweep's points with what is known of them.

    Attributes
    ----------
    axes : list of list of SweptColumn
        One list per dimension of the grid.
    spacings : list of str
        Of every dimension: ``linear``, ``logarithmic``, ``list`` or ``file``.
    positions : ndarray, shape (n_points,)
        Of the points in the grid, the last axis running fastest.
    status : ndarray of str, shape (n_points,)
        ``done``, ``failed`` or ``missing``.
    errors : mapping of int to str
        Why points failed, by their place in the table.
    columns : mapping of str to ndarray, shape (n_points,)
        Results: numbers, NaN where there is none, or text.
    config : mapping
        The configuration as it was given.
    """

    axes: list[list[SweptColumn]]
    spacings: list[str]
    positions: NDArray[np.int64]
    status: NDArray[np.str_]
    errors: Mapping[int, str]
    columns: Mapping[str, NDArray[Any]]
    config: Mapping[str, Any]

    @property
    def shape(self) -> tuple[int, ...]:
        """Of the grid."""
        return tuple(len(axis[0].values) for axis in self.axes)

    @property
    def indices(self) -> tuple[NDArray[np.intp], ...]:
        """Positions of the points along every axis."""
        return np.unravel_index(self.positions, self.shape)

    @property
    def versions(self) -> list[str]:
        """Of the program, by which rows were made."""
        return sorted({version for version in self.columns.get("version", ()) if version})

    def swept(self) -> dict[str, NDArray[Any]]:
        """Swept keys, one value per point."""
        return {
            column.name: column.values[index]
            for axis, index in zip(self.axes, self.indices, strict=True)
            for column in axis
        }

    def heading(self, name: str) -> str:
        """Name of a column with its unit."""
        units = {column.name: column.unit for axis in self.axes for column in axis}
        unit = units[name] if name in units else unit_of(name)
        return name if unit == "1" else f"{name} [{unit}]"


def sweep_table(plan: SweepPlan, folder: Path) -> SweepTable:
    """The table of all points of a plan, from the files of rows in its folder.

    Raises
    ------
    StorageError
        If a file of rows is damaged.
    """
    places: dict[str, list[int]] = {}
    for place, point in enumerate(plan.points):
        places.setdefault(point.name, []).append(place)
    n = len(plan.points)
    columns = _Columns(n)
    status, errors = np.full(n, MISSING, dtype="U7"), {}
    for file in row_files(folder, plan.liquids):
        shared = {**file.shared, "liquid": file.liquid, "version": file.version}
        for name, row in file.rows.items():
            for place in places.get(name, ()):
                status[place] = DONE
                columns.fill(place, {**dict(zip(file.columns, row, strict=True)), **shared})
        for name, why in file.failed.items():
            errors.update(dict.fromkeys(places.get(name, ()), why))
    failed = {place: errors[place] for place in sorted(errors) if status[place] != DONE}
    status[list(failed)] = FAILED
    return SweepTable(
        [[SweptColumn(key.name, unit_of_key(key.path), _coordinate(key.values)) for key in a.keys] for a in plan.axes],
        [axis.spacing for axis in plan.axes],
        np.array([point.position for point in plan.points], dtype=np.int64),
        status,
        failed,
        {**columns.ordered(), "point": np.array([point.name for point in plan.points], dtype=object)},
        plan.given,
    )


class _Columns:
    """Columns that come to be as rows need them: numbers with NaN, text with '' where there is none."""

    def __init__(self, n: int) -> None:
        self._n = n
        self._columns: dict[str, NDArray[Any]] = {}
        self._empty: set[str] = set()

    def fill(self, place: int, row: Mapping[str, Any]) -> None:
        for name, value in row.items():
            if value is None:
                self._empty.add(name)
                continue
            if name not in self._columns:
                self._columns[name] = self._new(name, value)
            self._columns[name][place] = value

    def _new(self, name: str, value: Any) -> NDArray[Any]:
        if name == "seed":
            # Seeds have more digits than a float holds.
            return np.full(self._n, _NO_SEED, dtype=np.int64)
        return np.full(self._n, "", dtype=object) if isinstance(value, str) else np.full(self._n, np.nan)

    def ordered(self) -> dict[str, NDArray[Any]]:
        """In an order that does not depend on which rows came first."""
        names = self._columns.keys() | self._empty
        listed = [*(name for name in _FIRST if name in names), *sorted(names - set(_FIRST))]
        return {name: self._columns.get(name, np.full(self._n, np.nan)) for name in listed}


def _coordinate(values: tuple[Any, ...]) -> NDArray[Any]:
    if all(isinstance(value, int | float) and not isinstance(value, bool) for value in values):
        return np.array(values)
    return np.array([value if isinstance(value, str) else json.dumps(value) for value in values], dtype=object)
