"""From a file with ``sweep`` to its points: every one a whole configuration, known by what its numbers depend on.

Points that differ in the problem only share one sampling. Nothing numerical is loaded here.
"""

from __future__ import annotations

import hashlib
import itertools
import json
import math
import os
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, NamedTuple

from pydantic import ValidationError

from mcgeo.errors import ConfigError
from mcgeo.runs.config import Config, resolved, state_identity, validated
from mcgeo.runs.config_faults import Remark, explain
from mcgeo.runs.named_files import NamedFiles
from mcgeo.runs.sampling_config import STRETCH
from mcgeo.runs.sweep_axes import Axis, axes_of
from mcgeo.runs.sweep_config import MOST_POINTS, SweepConfig
from mcgeo.runs.sweep_exclusions import exclusions_of
from mcgeo.runs.sweep_faults import PointFaults
from mcgeo.runs.sweep_positions import NoSuchPlaceError, data_at, indices_at, named_values
from mcgeo.runs.yaml_source import Fault, YamlSource, parse_yaml

_SHOWN_FAULTS = 10
_HASH_LENGTH = 20


class Point(NamedTuple):
    """One point of a sweep.

    Attributes
    ----------
    position : int
        In the full grid, the last axis running fastest.
    name : str
        Hash of all that its numbers depend on.
    liquid : str
        Hash of what its sampling depends on.
    family : str
        Hash of all of the problem but mass and tilt: what points of one family share is found once.
    """

    position: int
    name: str
    liquid: str
    family: str


@dataclass(frozen=True, eq=False)
class SweepPlan:
    """A sweep, expanded and validated.

    Attributes
    ----------
    file : str
        The configuration, as it was named.
    settings : SweepConfig
        ``sweep`` of the file.
    axes : list of Axis
    points : list of Point
        Without those excluded, in the order of the grid.
    """

    file: str
    settings: SweepConfig
    axes: list[Axis]
    points: list[Point]
    _base: Mapping[str, Any] = field(repr=False)
    _files: NamedFiles = field(repr=False)

    @property
    def shape(self) -> tuple[int, ...]:
        """Number of positions along every axis."""
        return tuple(len(axis) for axis in self.axes)

    @property
    def liquids(self) -> dict[str, list[Point]]:
        """Points by the liquid they share, in the order of the grid."""
        found: dict[str, list[Point]] = {}
        for point in self.points:
            found.setdefault(point.liquid, []).append(point)
        return found

    @property
    def given(self) -> dict[str, Any]:
        """The configuration as the file gives it."""
        return {**self._base, "sweep": self.settings.model_dump(mode="json", by_alias=True, exclude_unset=True)}

    def values(self, point: Point) -> dict[str, Any]:
        """Swept keys of a point and their values, as the file gives them."""
        return dict(named_values(self.axes, indices_at(self.shape, point.position)))

    def resolved(self, point: Point) -> dict[str, Any]:
        """The whole configuration of a point, every default filled in."""
        data = data_at(self._base, self.axes, indices_at(self.shape, point.position))
        config, _ = validated(data, self._files)
        assert config is not None
        return resolved(config)


def has_sweep(path: str | os.PathLike[str]) -> bool:
    """True for a YAML file with the key ``sweep``.

    Raises
    ------
    ConfigError
        If the file cannot be read as YAML.
    """
    return parse_yaml(path)[0].data.get("sweep") is not None


def load_sweep(path: str | os.PathLike[str], *, allow_outside: bool = False) -> SweepPlan:
    """Read a YAML file with ``sweep`` and validate every point; ``allow_outside`` as that of `load_config`.

    Raises
    ------
    ConfigError
        With the first ten faults, one line ``file:line:column: key.path: what is wrong`` each, those of points with the
        values at which they occur, and the number of the others.
    """
    source, faults = parse_yaml(path)
    files = NamedFiles(Path(path).parent, allow_outside)
    keys = source.data.get("sweep")
    if keys is None:
        fault = Fault(source.locate(()), (), "has no key sweep; mcgeo sample and scan do a single run")
        raise ConfigError([fault.line(source.path)])
    settings, remarks = _settings(keys)
    axes: list[Axis] = []
    if settings is not None:
        axes, remarks = axes_of(settings, files)
        n = math.prod(len(axis) for axis in axes)
        if n > MOST_POINTS:
            remarks.append(Remark(("sweep", "axes"), f"give {n} points; at most {MOST_POINTS} work", at_key=True))
    faults += [Fault(source.locate(r.path, at_key=r.at_key), r.path, r.message) for r in remarks]
    if settings is None or faults:
        raise ConfigError(_lines(source, faults))
    base = {key: value for key, value in source.data.items() if key != "sweep"}
    is_excluded, remarks = exclusions_of(settings.exclude, axes)
    points, point_faults = _expanded(source, base, axes, is_excluded, files)
    faults = [Fault(source.locate(r.path, at_key=r.at_key), r.path, r.message) for r in remarks] + point_faults
    if not faults and not points:
        faults = [Fault(source.locate(("sweep", "exclude"), at_key=True), ("sweep", "exclude"), "leaves no point")]
    if faults:
        raise ConfigError(_lines(source, faults))
    return SweepPlan(source.path, settings, axes, points, base, files)


def _lines(source: YamlSource, faults: Sequence[Fault]) -> list[str]:
    lines = [fault.line(source.path) for fault in sorted(faults, key=lambda fault: fault.mark)]
    more = len(lines) - _SHOWN_FAULTS
    return lines if more <= 0 else [*lines[:_SHOWN_FAULTS], f"{source.path}: and {more} more faults"]


def _settings(keys: Any) -> tuple[SweepConfig | None, list[Remark]]:
    try:
        return SweepConfig.model_validate(keys), []
    except ValidationError as error:
        schema = {**SweepConfig.model_json_schema(by_alias=True)}
        return None, [remark._replace(path=("sweep", *remark.path)) for remark in explain(error, schema)]


def _expanded(
    source: YamlSource,
    base: Mapping[str, Any],
    axes: Sequence[Axis],
    is_excluded: Callable[[Sequence[int]], bool],
    files: NamedFiles,
) -> tuple[list[Point], list[Fault]]:
    points: list[Point] = []
    faults = PointFaults(source, axes)
    for position, indices in enumerate(itertools.product(*(range(len(axis)) for axis in axes))):
        if is_excluded(indices):
            continue
        faults.n_points += 1
        try:
            config, remarks = validated(data_at(base, axes, indices), files)
        except NoSuchPlaceError as fault:
            faults.add(indices, Remark(fault.key.path, "there is no such place in the configuration", at_key=True))
            continue
        for remark in remarks:
            faults.add(indices, remark)
        if config is None or remarks:
            continue
        if config.scan.road != "plane":
            message = "must be plane in a sweep, not torus; mcgeo scan goes along the torus road for one configuration"
            faults.add(indices, Remark(("scan", "road"), message))
            continue
        points.append(point_of(config, position))
    return points, list(faults.found())


def point_of(config: Config, position: int = 0) -> Point:
    """Name and liquid of a configuration; ``scan`` and threads, which change no number of the optimum, are left out."""
    sampling, data = state_identity(config), resolved(config)
    problem = data["problem"]
    if config.sampling.target_error is not None:
        # The run is as long as this problem's error needs: another problem has another run.
        decides = problem if config.sampling.target_quantity == STRETCH else problem["interaction"]
        sampling = {**sampling, "target_of": decides}
    name = _hash({**sampling, "problem": problem, "material": data["material"]})
    family = _hash({key: value for key, value in problem.items() if key not in ("mass", "tilt")})
    return Point(position, name, _hash(sampling), family)


def _hash(keys: Mapping[str, Any]) -> str:
    text = json.dumps(keys, sort_keys=True, separators=(",", ":"), allow_nan=False)
    return hashlib.sha256(text.encode()).hexdigest()[:_HASH_LENGTH]
