"""Axes of a sweep: the values that keys of the configuration take, and where the file says so."""

from __future__ import annotations

import csv
import io
import json
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from pydantic_core import PydanticCustomError

from mcgeo.runs.config import UNRELATED_TO_RESULTS
from mcgeo.runs.config_faults import Remark, show
from mcgeo.runs.named_files import NamedFiles, NotPlainError, read_plain
from mcgeo.runs.sweep_config import (
    AxisConfig,
    FileAxisConfig,
    ListAxisConfig,
    RangeAxisConfig,
    SingleAxisConfig,
    SweepConfig,
    TogetherAxisConfig,
)
from mcgeo.runs.yaml_nodes import looks_like_number
from mcgeo.runs.yaml_source import Path

# A key that no configuration has may hold what breaks lines.
_STEP = re.compile(r"([A-Za-z0-9_]+)((?:\[[0-9]+\])*)")
# Digits kept of the values of a range: its rounding would else show in tables and file names.
_DIGITS = 12
_MAX_BYTES = 10_000_000
_NOT_SWEPT = {
    "sweep": "a sweep cannot hold another",
    "scan": "a sweep finds optima, which no key of scan changes",
    **{f"sampling.{key}": "no result depends on it" for key in UNRELATED_TO_RESULTS},
}
_WORDS = {"true": True, "false": False, "null": None}


@dataclass(frozen=True)
class SweptKey:
    """One key of an axis.

    Attributes
    ----------
    name : str
        As written, ``problem.mass.ratio``.
    path : tuple
        Its steps, whole numbers for positions in lists.
    values : tuple
        One per position along the axis.
    place : tuple
        Path in the file of the entry that says so.
    """

    name: str
    path: Path
    values: tuple[Any, ...]
    place: Path


@dataclass(frozen=True)
class Axis:
    """One dimension of a sweep: a key, or several that change together.

    Attributes
    ----------
    keys : tuple of SweptKey
        All with as many values.
    spacing : str
        ``linear``, ``logarithmic``, ``list`` or ``file``.
    """

    keys: tuple[SweptKey, ...]
    spacing: str

    @property
    def name(self) -> str:
        """Of the dimension: its first key."""
        return self.keys[0].name

    def __len__(self) -> int:
        return len(self.keys[0].values)


def key_path(name: str) -> Path:
    """Steps of a key: ``problem.interaction.terms[0].weight`` gives five.

    Raises
    ------
    ValueError
        If the text is no key.
    """
    steps: list[str | int] = []
    for part in name.split("."):
        match = _STEP.fullmatch(part)
        if match is None:
            raise ValueError(name)
        steps += [match[1], *(int(position) for position in re.findall("[0-9]+", match[2]))]
    return tuple(steps)


def range_values(keys: RangeAxisConfig) -> tuple[float, ...]:
    """Values of a range, both ends exactly as given."""
    first, last, n = keys.from_, keys.to, keys.points
    if keys.spacing == "logarithmic":
        inner = [first * (last / first) ** (i / (n - 1)) for i in range(1, n - 1)]
    else:
        inner = [first + (last - first) * (i / (n - 1)) for i in range(1, n - 1)]
    return (first, *(float(f"{value:.{_DIGITS}g}") for value in inner), last)


def axes_of(sweep: SweepConfig, files: NamedFiles) -> tuple[list[Axis], list[Remark]]:
    """The axes, and what is wrong with them; paths of remarks are those of the file."""
    axes: list[Axis] = []
    remarks: list[Remark] = []
    for position, keys in enumerate(sweep.axes):
        try:
            axes.append(_axis(keys, ("sweep", "axes", position), files))
        except _AxisFault as fault:
            remarks.append(fault.remark)
    return axes, [*remarks, *_clashes(axes)]


class _AxisFault(Exception):
    """Carries the remark on an axis that cannot be read."""

    def __init__(self, path: Path, message: str) -> None:
        super().__init__(message)
        self.remark = Remark(path, message)


def _axis(keys: AxisConfig, place: Path, files: NamedFiles) -> Axis:
    if isinstance(keys, FileAxisConfig):
        return Axis(tuple(_from_file(keys, place, files)), "file")
    if not isinstance(keys, TogetherAxisConfig):
        return _all_different([_single(keys, place)], keys.spacing if isinstance(keys, RangeAxisConfig) else "list")
    found = [_single(single, (*place, "together", i)) for i, single in enumerate(keys.together)]
    for key in found[1:]:
        if len(key.values) != len(found[0].values):
            raise _AxisFault(
                key.place,
                f"{key.name} has {_count(key)}, but {found[0].name}, which changes together with it, has "
                f"{_count(found[0])}",
            )
    return _all_different(found, "list")


def _all_different(keys: Sequence[SweptKey], spacing: str) -> Axis:
    """The axis, unless it holds the same point twice; a file may, its rows being measured."""
    seen = set()
    for position, values in enumerate(zip(*(key.values for key in keys), strict=True)):
        known = json.dumps([float(v) if type(v) is int else v for v in values], sort_keys=True)
        if known in seen:
            listed = ", ".join(f"{key.name} {show(value)}" for key, value in zip(keys, values, strict=True))
            raise _AxisFault((*keys[0].place, "values", position), f"holds {listed} twice; keep one")
        seen.add(known)
    return Axis(tuple(keys), spacing)


def _count(key: SweptKey) -> str:
    return f"{len(key.values)} value{'s' * (len(key.values) != 1)}"


def _single(keys: SingleAxisConfig, place: Path) -> SweptKey:
    values = keys.values if isinstance(keys, ListAxisConfig) else range_values(keys)
    return _swept_key(keys.key, values, place, (*place, "key"))


def _swept_key(name: str, values: tuple[Any, ...], place: Path, key_place: Path) -> SweptKey:
    try:
        path = key_path(name)
    except ValueError:
        raise _AxisFault(
            key_place, f"must be a key of the configuration, as problem.mass.ratio, not {name!r}"
        ) from None
    for refused, why in _NOT_SWEPT.items():
        if name == refused or name.startswith(f"{refused}."):
            raise _AxisFault(key_place, f"{name} cannot take part: {why}")
    return SweptKey(name, path, values, place)


def _from_file(keys: FileAxisConfig, place: Path, files: NamedFiles) -> Iterator[SweptKey]:
    headings, rows = _table(keys.file, (*place, "file"), files)
    for name, heading in keys.columns.items():
        column_place = (*place, "columns", name)
        if headings.count(heading) != 1:
            raise _AxisFault(
                column_place,
                f"{keys.file} has {'no' if heading not in headings else 'more than one'} column {heading!r}; "
                f"its columns are {', '.join(headings)}",
            )
        column = headings.index(heading)
        yield _swept_key(name, tuple(_value(row[column]) for row in rows), column_place, column_place)


def _table(file: str, place: Path, files: NamedFiles) -> tuple[list[str], list[list[str]]]:
    """Headings and rows of a file of comma-separated values; empty lines and those that begin with # are no rows."""
    try:
        text = read_plain(files.path(file), _MAX_BYTES, "table").decode("utf-8-sig")
        lines = [line for line in text.splitlines() if line.strip() and not line.startswith("#")]
        table = [[cell.strip() for cell in row] for row in csv.reader(io.StringIO("\n".join(lines)), strict=True)]
    except PydanticCustomError as error:
        raise _AxisFault(place, error.message()) from None
    except NotPlainError as error:
        raise _AxisFault(place, f"{file}: {error}") from None
    except (UnicodeDecodeError, csv.Error) as error:
        raise _AxisFault(place, f"{file}: is no UTF-8 text of comma-separated values: {error}") from None
    if len(table) < 2:
        raise _AxisFault(place, f"{file}: needs a line of headings and at least one row")
    for number, row in enumerate(table[1:], start=1):
        if len(row) != len(table[0]):
            raise _AxisFault(place, f"{file}: row {number} has {len(row)} entries, the headings have {len(table[0])}")
    return table[0], table[1:]


def _value(cell: str) -> Any:
    if looks_like_number(cell):
        number = float(cell)
        return int(cell) if number.is_integer() and re.fullmatch("[-+]?[0-9]+", cell) else number
    return _WORDS.get(cell, cell)


def _clashes(axes: list[Axis]) -> Iterator[Remark]:
    """A key swept twice, or one that would wipe out what an earlier one set inside it."""
    earlier: list[SweptKey] = []
    for key in (key for axis in axes for key in axis.keys):
        for other in earlier:
            if key.path == other.path:
                yield Remark(key.place, f"{key.name} is swept twice; put all its values on one axis")
            elif other.path[: len(key.path)] == key.path:
                yield Remark(key.place, f"{key.name} holds {other.name}, an earlier axis; put that axis after this one")
        earlier.append(key)
