"""The points of a grid: positions along its axes, and the configuration that stands at each."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from mcgeo.runs.sweep_axes import Axis, SweptKey
from mcgeo.runs.yaml_source import Path


def replaced(tree: Any, path: Path, value: Any) -> Any:
    """The tree with another value at a path, copied along it; groups that are missing are made.

    Raises
    ------
    KeyError
        If a list is too short, or something that is no group or list stands on the way.
    """
    if not path:
        return value
    step = path[0]
    if isinstance(step, int):
        if not isinstance(tree, list | tuple) or step >= len(tree):
            raise KeyError(step)
        return [*tree[:step], replaced(tree[step], path[1:], value), *tree[step + 1 :]]
    if tree is None:
        tree = {}
    if not isinstance(tree, Mapping):
        raise KeyError(step)
    return {**tree, step: replaced(tree.get(step), path[1:], value)}


def same_value(a: Any, b: Any) -> bool:
    """Equal, numbers up to rounding."""
    if all(isinstance(value, int | float) and not isinstance(value, bool) for value in (a, b)):
        return math.isclose(a, b, rel_tol=1e-9, abs_tol=0.0)
    return bool(a == b)


class NoSuchPlaceError(Exception):
    """A swept key that points into something that is no group, or beyond the end of a list."""

    def __init__(self, key: SweptKey) -> None:
        super().__init__(key.name)
        self.key = key


def indices_at(shape: Sequence[int], position: int) -> tuple[int, ...]:
    """Positions along the axes of a position in the grid."""
    indices = []
    for length in reversed(shape):
        position, index = divmod(position, length)
        indices.append(index)
    return tuple(reversed(indices))


def named_values(axes: Sequence[Axis], indices: Sequence[int]) -> Iterator[tuple[str, Any]]:
    """Swept keys and their values."""
    for axis, index in zip(axes, indices, strict=True):
        for key in axis.keys:
            yield key.name, key.values[index]


def data_at(base: Mapping[str, Any], axes: Sequence[Axis], indices: Sequence[int]) -> Any:
    """The base with the swept keys replaced.

    Raises
    ------
    NoSuchPlaceError
        If a key points beyond the end of a list, or into something that is no group.
    """
    data: Any = base
    for axis, index in zip(axes, indices, strict=True):
        for key in axis.keys:
            try:
                data = replaced(data, key.path, key.values[index])
            except KeyError:
                raise NoSuchPlaceError(key) from None
    return data
