"""``plot sweep``, ``plot map``, ``plot aspects``: figures of a sweep's table."""

from __future__ import annotations

import argparse
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from numpy.typing import NDArray

from mcgeo.commands.sweep import SWEEP_FILE
from mcgeo.errors import ConfigError
from mcgeo.report.labels import key_label, quantity_label, unit_text, value_label
from mcgeo.report.sweep_figure import Family, SweptAxis, aspect_curves, sweep_curves
from mcgeo.report.sweep_map import sweep_map
from mcgeo.runs.sweep_grid import SweepGrid, read_sweep_grid, value_text
from mcgeo.runs.sweep_table import SweptColumn

Drawing = tuple[Axes, Mapping[str, Any]]

_DEFAULT_QUANTITY = "stretch"


def draw(arguments: argparse.Namespace) -> tuple[Axes, Mapping[str, Any], dict[str, str], Path]:
    """The figure, its table, its provenance, and the path it belongs to, without ending."""
    path = arguments.file / SWEEP_FILE if arguments.file.is_dir() else arguments.file
    whole = read_sweep_grid(path)
    fixed = _fixed_values(arguments.at or [])
    grid = whole.fixed(fixed)
    title = ", ".join(_fixed_words(grid.place(key)[1]) for key in fixed)
    axes, table = DRAWN[arguments.what](grid, arguments, title)
    made_by = sorted({str(version) for version in grid.columns["version"].ravel() if version})
    liquids = sorted({str(liquid) for liquid in grid.columns["liquid"].ravel() if liquid})
    source = {"configuration": grid.configuration, "rows made by": ", ".join(made_by), "liquids": ", ".join(liquids)}
    # The table of the whole sweep is sweep.csv: a figure's must not take its place.
    name = {"sweep": "curves"}.get(arguments.what, arguments.what)
    quantity = "" if arguments.what == "aspects" else f"_{arguments.quantity or _DEFAULT_QUANTITY}"
    return axes, table, source, path.parent / f"{name}{quantity}"


def _fixed_values(given: list[str]) -> dict[str, str]:
    pairs = [entry.partition("=") for entry in given]
    wrong = [f"--at {entry}: must be KEY=VALUE" for entry in given if not all(entry.partition("="))]
    if wrong:
        raise ConfigError(wrong)
    return {key: value for key, _, value in pairs}


def _fixed_words(column: SweptColumn) -> str:
    unit = "" if column.unit == "1" else f" {unit_text(column.unit)}"
    return f"{key_label(column.name, '1')} = {value_label(column.values[0])}{unit}"


def _curves(grid: SweepGrid, arguments: argparse.Namespace, title: str) -> Drawing:
    name = arguments.quantity or _DEFAULT_QUANTITY
    grid.quantity(name)
    place, along = _along(grid, arguments.along)
    _, second = _families_of(grid, place, arguments.families)
    families = _families(grid, along, second, _numbers(along), name)
    axes = sweep_curves(
        families,
        along=_swept_axis(along, grid.spacings[place]),
        ylabel=quantity_label(name, grid.units[name]),
        family_label=key_label(second.name, second.unit) if second else "",
        title=title,
    )
    return axes, _long_table(along, second, families, _heading(name, grid.units[name]))


def _aspects(grid: SweepGrid, arguments: argparse.Namespace, title: str) -> Drawing:
    if arguments.quantity:
        raise ConfigError(["--quantity: aspects are those of hole and mass; use plot sweep for others"])
    stretch = grid.quantity("mass_stretch")
    varying = [index for index in grid.free_axes if np.nanmax(np.ptp(np.nan_to_num(stretch), axis=index)) > 0.0]
    if arguments.along:
        place, along = grid.place(arguments.along)
    elif varying:
        place, along = varying[0], grid.axes[varying[0]][0]
    else:
        raise ConfigError(["aspects need a sweep over the mass; here every point has the same"])
    _, second = _families_of(grid, place, arguments.families)
    families = _families(grid, along, second, None, "aspect_ratio")
    axes = aspect_curves(families, family_label=key_label(second.name, second.unit) if second else "", title=title)
    table = _long_table(along, second, families, "aspect ratio of the hole")
    return axes, {**table, "aspect ratio of the mass metric": np.concatenate([family.x for family in families])}


def _map(grid: SweepGrid, arguments: argparse.Namespace, title: str) -> Drawing:
    name = arguments.quantity or _DEFAULT_QUANTITY
    values = grid.quantity(name)
    first, along = _along(grid, arguments.along)
    second, across = _families_of(grid, first, arguments.families)
    if across is None:
        raise ConfigError(["a map needs two swept keys with more than one value; plot sweep draws along one"])
    order = (_ascending(across), _ascending(along))
    cells = _plane(values, second, first)[np.ix_(*order)]
    verdict = _plane(grid.columns["shape_verdict"], second, first)[np.ix_(*order)]
    axes = sweep_map(
        cells,
        verdict,
        along=_swept_axis(along, grid.spacings[first], order[1]),
        across=_swept_axis(across, grid.spacings[second], order[0]),
        label=quantity_label(name, grid.units[name]),
        title=title,
    )
    columns = {
        _heading(along.name, along.unit): np.tile(along.values[order[1]], len(order[0])),
        _heading(across.name, across.unit): np.repeat(across.values[order[0]], len(order[1])),
        _heading(name, grid.units[name]): cells.ravel(),
        f"error of {_heading(name, grid.units[name])}": _plane(grid.error(name), second, first)[np.ix_(*order)].ravel(),
        "shape verdict": verdict.ravel(),
    }
    return axes, columns


def _along(grid: SweepGrid, key: str | None) -> tuple[int, SweptColumn]:
    """The key asked for, or that with the most values, numbers before words."""
    if key is not None:
        return grid.place(key)
    if not grid.free_axes:
        raise ConfigError(["every swept key has one value: there is nothing to draw against"])
    index = max(grid.free_axes, key=lambda i: (_is_number(grid.axes[i][0]), len(grid.axes[i][0].values), -i))
    return index, grid.axes[index][0]


def _families_of(grid: SweepGrid, along: int, key: str | None) -> tuple[int, SweptColumn | None]:
    """The key that tells lines apart; every other one must have one value."""
    place = grid.place(key) if key is not None else None
    others = [index for index in grid.free_axes if index != along]
    if place is None and len(others) == 1:
        place = others[0], grid.axes[others[0]][0]
    if place is not None and place[0] == along:
        raise ConfigError([f"{key}: changes together with the key along the axis"])
    left = [index for index in others if place is None or index != place[0]]
    if left:
        listed = [
            f"{grid.axes[index][0].name}: {', '.join(value_text(value) for value in grid.axes[index][0].values)}"
            for index in left
        ]
        hint = "fix a value with --at KEY=VALUE" + ("" if place else ", or choose lines with --families KEY")
        raise ConfigError(["more keys are swept than one figure shows; " + hint, *(f"  {line}" for line in listed)])
    return place if place is not None else (along, None)


def _families(
    grid: SweepGrid, along: SweptColumn, second: SweptColumn | None, x: NDArray[Any] | None, name: str
) -> list[Family]:
    """One family per value of the second key; without ``x`` along the mass metric's aspect ratio."""
    first = grid.place(along.name)[0]
    other = first if second is None else grid.place(second.name)[0]

    def lines(values: NDArray[Any]) -> NDArray[Any]:
        return values.reshape(1, -1) if second is None else _plane(values, other, first)

    columns = {key: lines(grid.columns[key]) for key in (name, "shape_verdict", "run_verdict", "mass_stretch")}
    errors, found = lines(grid.error(name)), []
    for index in range(len(errors)):
        found.append(
            Family(
                None if second is None else second.values[index],
                np.exp(columns["mass_stretch"][index]) if x is None else x,
                columns[name][index],
                errors[index],
                columns["shape_verdict"][index],
                columns["run_verdict"][index] == "converged",
            )
        )
    return found


def _plane(values: NDArray[Any], rows: int, columns: int) -> NDArray[Any]:
    """Two axes of the grid; the others have one value."""
    moved = np.moveaxis(values, (rows, columns), (0, 1))
    return moved.reshape(moved.shape[:2])


def _is_number(column: SweptColumn) -> bool:
    return column.values.dtype.kind in "if"


def _numbers(column: SweptColumn) -> NDArray[Any]:
    return column.values.astype(float) if _is_number(column) else np.arange(len(column.values), dtype=float)


def _ascending(column: SweptColumn) -> NDArray[np.intp]:
    return np.argsort(_numbers(column), kind="stable")


def _swept_axis(column: SweptColumn, spacing: str, order: NDArray[np.intp] | None = None) -> SweptAxis:
    values = column.values if order is None else column.values[order]
    numbers = _is_number(column)
    return SweptAxis(
        key_label(column.name, column.unit),
        spacing == "logarithmic" and numbers,
        [] if numbers else [value_label(value) for value in values],
        values.tolist() if numbers else [],
    )


def _heading(name: str, unit: str) -> str:
    return name if unit == "1" else f"{name} [{unit}]"


def _long_table(
    along: SweptColumn, second: SweptColumn | None, families: list[Family], heading: str
) -> dict[str, NDArray[Any]]:
    n = len(along.values)
    table: dict[str, NDArray[Any]] = {_heading(along.name, along.unit): np.tile(along.values, len(families))}
    if second is not None:
        table[_heading(second.name, second.unit)] = np.repeat(second.values, n)
    return table | {
        heading: np.concatenate([family.y for family in families]),
        f"error of {heading}": np.concatenate([family.error for family in families]),
        "shape verdict": np.concatenate([family.shape_verdict for family in families]),
        "converged": np.concatenate([family.converged for family in families]),
    }


DRAWN = {"sweep": _curves, "map": _map, "aspects": _aspects}
