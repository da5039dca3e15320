"""What is wrong with points of a sweep, said once each and at the entry of the file that is to blame."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from mcgeo.runs.config_faults import Remark, show
from mcgeo.runs.sweep_axes import Axis, SweptKey
from mcgeo.runs.sweep_positions import named_values
from mcgeo.runs.yaml_source import Fault, YamlSource


class PointFaults:
    """Each sort of fault once: as one of the file where all points have it, else with the values of the first point.

    Attributes
    ----------
    n_points : int
        Points looked at, those without a fault counted.
    """

    def __init__(self, source: YamlSource, axes: Sequence[Axis]) -> None:
        self._source, self._axes = source, axes
        self._seen: dict[Remark, list[tuple[int, ...]]] = {}
        self.n_points = 0

    def add(self, indices: tuple[int, ...], remark: Remark) -> None:
        """A fault at these positions along the axes."""
        self._seen.setdefault(remark, []).append(indices)

    def found(self) -> Iterator[Fault]:
        """One fault of every sort, each at its place in the file."""
        for remark, where in self._seen.items():
            swept = self._swept(remark)
            message = remark.message
            if swept is not None or len(where) < self.n_points:
                listed = ", ".join(f"{name} {show(value)}" for name, value in named_values(self._axes, where[0]))
                others = f" and at {len(where) - 1} other points" if len(where) > 1 else ""
                message = f"{message} (at {listed}{others})"
            place = remark.path
            if swept is not None:
                place = self._place(swept, where[0], remark)
            yield Fault(self._source.locate(place, at_key=remark.at_key), remark.path, message)

    def _swept(self, remark: Remark) -> SweptKey | None:
        """The swept key that the fault lies in: the one with the longest path."""
        inside = [
            key
            for axis in self._axes
            for key in axis.keys
            if remark.path[: len(key.path)] == key.path
            or (key.path[: len(remark.path)] == remark.path and remark.path not in self._source.marks)
        ]
        return max(inside, key=lambda key: len(key.path), default=None)

    def _place(self, key: SweptKey, indices: tuple[int, ...], remark: Remark) -> tuple[str | int, ...]:
        """The value in the file, or what stands for it: a range, a column; the key itself where that is at fault."""
        axis, index = next((a, i) for a, i in zip(self._axes, indices, strict=True) if key in a.keys)
        if remark.at_key and len(remark.path) <= len(key.path) and axis.spacing != "file":
            return (*key.place, "key")
        return (*key.place, "values", index, *remark.path[len(key.path) :])
