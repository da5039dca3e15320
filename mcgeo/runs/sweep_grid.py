"""A sweep's results as a grid, read from ``sweep.h5``, and lines and planes out of it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import ConfigError, StorageError
from mcgeo.runs.sweep_file import FORMAT
from mcgeo.runs.sweep_table import SweptColumn


@dataclass(frozen=True, eq=False)
class SweepGrid:
    """What a sweep found, on the grid of its axes.

    Attributes
    ----------
    axes : list of list of SweptColumn
        One list per dimension: its first key, and those that change together with it.
    spacings : list of str
        Of every dimension: ``linear``, ``logarithmic``, ``list`` or ``file``.
    columns : mapping of str to ndarray, shape (n_1, n_2, ...)
        Results: NaN, or empty text, where there is none.
    units : mapping of str to str
        Unit of each column.
    configuration : str
        Of the sweep, as JSON.
    """

    axes: Sequence[Sequence[SweptColumn]]
    spacings: Sequence[str]
    columns: Mapping[str, NDArray[Any]]
    units: Mapping[str, str]
    configuration: str

    @property
    def free_axes(self) -> list[int]:
        """Dimensions with more than one value."""
        return [index for index, axis in enumerate(self.axes) if len(axis[0].values) > 1]

    def place(self, key: str) -> tuple[int, SweptColumn]:
        """Dimension and values of a swept key; the end of its name does where no other key has the same.

        Raises
        ------
        ConfigError
            If no key, or more than one, has this name.
        """
        swept = [(index, column) for index, axis in enumerate(self.axes) for column in axis]
        found = [place for place in swept if place[1].name == key]
        found = found or [place for place in swept if place[1].name.endswith(f".{key}")]
        if len(found) != 1:
            names = ", ".join(column.name for _, column in swept)
            many = "more than one" if found else "no"
            raise ConfigError([f"{key}: {many} swept key of this name; swept are {names}"])
        return found[0]

    def quantity(self, name: str) -> NDArray[np.float64]:
        """A column of numbers on the grid.

        Raises
        ------
        ConfigError
            If there is no such column.
        """
        numbers = {key: values for key, values in self.columns.items() if values.dtype.kind == "f"}
        if name not in numbers:
            listed = ", ".join(key for key in numbers if "error" not in key)
            raise ConfigError([f"{name}: no quantity of this sweep; it has {listed}"])
        return numbers[name]

    def error(self, name: str) -> NDArray[np.float64]:
        """Standard error of a quantity; zero where it has none."""
        values = self.columns.get(error_name(name))
        return np.zeros(self.columns[name].shape) if values is None else np.where(np.isfinite(values), values, 0.0)

    def fixed(self, at: Mapping[str, str]) -> SweepGrid:
        """The part of the grid where swept keys have the given values; their axes keep that one value.

        Raises
        ------
        ConfigError
            If an axis has no such key or value.
        """
        grid = self
        for key, wanted in at.items():
            index, column = grid.place(key)
            found = [n for n, value in enumerate(column.values) if same_value(value, wanted)]
            if not found:
                listed = ", ".join(value_text(value) for value in column.values)
                raise ConfigError([f"{key}: {wanted} is none of its values: {listed}"])
            grid = grid._taken(index, found)
        return grid

    def _taken(self, index: int, places: list[int]) -> SweepGrid:
        axes = [list(axis) for axis in self.axes]
        axes[index] = [SweptColumn(column.name, column.unit, column.values[places]) for column in axes[index]]
        columns = {name: np.take(values, places, axis=index) for name, values in self.columns.items()}
        return SweepGrid(axes, self.spacings, columns, self.units, self.configuration)


def error_name(quantity: str) -> str:
    """Column with the error of a quantity; that of an angle in degrees drops its unit."""
    for unit in ("_mev", "_kelvin"):
        if quantity.endswith(unit):
            return f"{quantity.removesuffix(unit)}_error{unit}"
    return f"{quantity.removesuffix('_degrees')}_error"


def same_value(value: Any, wanted: str) -> bool:
    """Whether a swept value is the one written: numbers to six digits, text as it is shown."""
    if isinstance(value, str):
        return wanted == value
    try:
        return bool(np.isclose(float(wanted), float(value), rtol=1e-5, atol=0.0))
    except ValueError:
        return False


def value_text(value: Any) -> str:
    """A swept value in words."""
    return value if isinstance(value, str) else f"{float(value):.6g}"


def read_sweep_grid(path: Path) -> SweepGrid:
    """Read ``sweep.h5``.

    Raises
    ------
    StorageError
        If it is missing, damaged or another file.
    """
    if not path.is_file():
        raise StorageError(f"{path}: no such file; mcgeo sweep CONFIG writes it")
    try:
        with h5py.File(path, "r") as file:
            if file.attrs.get("format") != FORMAT:
                raise StorageError(f"{path}: no table of a sweep of this version")
            return _contents(file)
    except (OSError, KeyError, ValueError, TypeError, RuntimeError, AttributeError, IndexError) as fault:
        raise StorageError(f"{path}: damaged or no table of a sweep; mcgeo sweep CONFIG writes it anew") from fault


def _contents(file: Any) -> SweepGrid:
    status = file["status"]
    scales = [dimension[0] for dimension in status.dims]
    axes = {_name(scale): [_column(scale)] for scale in scales}
    for name in str(status.attrs.get("coordinates", "")).split():
        axes[_name(file[name].dims[0][0])].append(_column(file[name]))
    swept = {column.name for axis in axes.values() for column in axis}
    results = {name: dataset for name, dataset in file.items() if name not in swept}
    return SweepGrid(
        list(axes.values()),
        [str(scale.attrs["spacing"]) for scale in scales],
        {name: _values(dataset) for name, dataset in results.items()},
        {name: str(dataset.attrs["units"]) for name, dataset in results.items()},
        str(file.attrs["config"]),
    )


def _name(dataset: Any) -> str:
    return str(dataset.name).lstrip("/")


def _column(dataset: Any) -> SweptColumn:
    return SweptColumn(_name(dataset), str(dataset.attrs["units"]), _values(dataset))


def _values(dataset: Any) -> NDArray[Any]:
    values: NDArray[Any] = dataset.asstr()[()] if h5py.check_string_dtype(dataset.dtype) else dataset[()]
    return values
