"""Points left out of a sweep."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

from mcgeo.runs.config_faults import Remark, show
from mcgeo.runs.sweep_axes import Axis
from mcgeo.runs.sweep_positions import same_value

_BOUNDS = {"above", "below"}


def exclusions_of(
    exclude: Sequence[Mapping[str, Any]], axes: Sequence[Axis]
) -> tuple[Callable[[Sequence[int]], bool], list[Remark]]:
    """Whether positions along the axes are excluded, and what is wrong with the rules.

    Parameters
    ----------
    exclude : sequence of mapping
        ``sweep.exclude``: a point is left out when all values of a rule agree.
    """
    places = {key.name: (number, key.values) for number, axis in enumerate(axes) for key in axis.keys}
    rules: list[dict[int, set[int]]] = []
    remarks = []
    for position, given in enumerate(exclude):
        rule: dict[int, set[int]] = {}
        for name, wanted in given.items():
            path = ("sweep", "exclude", position, name)
            if name not in places:
                listed = ", ".join(places)
                remarks.append(Remark(path, f"is no swept key; they are {listed}", at_key=True))
                continue
            axis, values = places[name]
            matching = {index for index, value in enumerate(values) if _matches(value, wanted)}
            if not matching:
                remarks.append(Remark(path, f"no value of {name} is {_words(wanted)}; it takes {show(list(values))}"))
            rule[axis] = rule.get(axis, matching) & matching
        if not given:
            remarks.append(Remark(("sweep", "exclude", position), "must name at least one swept key"))
        rules.append(rule)

    def is_excluded(indices: Sequence[int]) -> bool:
        return any(all(indices[axis] in wanted for axis, wanted in rule.items()) for rule in rules)

    return is_excluded, remarks


def _is_range(wanted: Any) -> bool:
    return isinstance(wanted, Mapping) and bool(wanted) and set(wanted) <= _BOUNDS


def _matches(value: Any, wanted: Any) -> bool:
    if not _is_range(wanted):
        return same_value(value, wanted)
    if not isinstance(value, int | float) or not all(isinstance(bound, int | float) for bound in wanted.values()):
        return False
    return bool(wanted.get("above", -float("inf")) < value < wanted.get("below", float("inf")))


def _words(wanted: Any) -> str:
    if not _is_range(wanted):
        return show(wanted)
    return " and ".join(f"{name} {show(bound)}" for name, bound in wanted.items())
