"""What a result file must hold, computed from its configuration before anything but that is read."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping, Sequence
from typing import Any, NamedTuple

import h5py

from mcgeo.errors import ConfigError, GeometryError
from mcgeo.kernels.lanes import LANES
from mcgeo.runs.build import schedule_from
from mcgeo.runs.checked_hdf5 import Shape, Unexpected, array, member, number, require_names, text
from mcgeo.runs.config import config_from_resolved, resolved
from mcgeo.runs.ending import ending_of
from mcgeo.runs.experiment import experiment_of
from mcgeo.runs.sampled import Blocks
from mcgeo.sampling.chain import ChainState, Schedule
from mcgeo.sampling.measurement import CONTROLS
from mcgeo.sampling.walkers import WalkerArrays

FLOAT, INTEGER, WORD, FLAG = "<f8", "<i8", "<u8", "bool"
PARTS = ("axes", "blocks", "checkpoint", "config")
LONGEST_CONFIG = 100_000_000

# Where a state has no forces there are no control variates.
_OPTIONAL = {f"means/{CONTROLS}"}


class Layout(NamedTuple):
    """Shapes that follow from a configuration.

    Attributes
    ----------
    schedule : Schedule
    n_components, n_electrons : int
    measured : mapping
        ``means/NAME`` or ``counts/NAME`` -> shape behind block and walker.
    """

    schedule: Schedule
    n_components: int
    n_electrons: int
    measured: Mapping[str, Shape]

    @classmethod
    def of(cls, keys: Mapping[str, Any]) -> Layout:
        """Of a resolved configuration."""
        experiment = experiment_of(keys)
        state = experiment.states[0]
        schedule = schedule_from(keys, state)
        return cls(schedule, len(experiment.states), state.n_electrons, experiment.measurements[0].shapes)

    def blocks(self, n_blocks: int) -> dict[str, tuple[Shape, str]]:
        """Shape and type of every dataset in ``blocks``."""
        walkers, measurements = self.schedule.n_walkers, self.schedule.measurements_per_block
        found = {
            name: ((n_blocks, walkers, *shape), INTEGER if name.startswith("counts/") else FLOAT)
            for name, shape in self.measured.items()
        }
        found["trace"] = (self.n_components, n_blocks, walkers, measurements), FLOAT
        found["accepted"] = (self.n_components, n_blocks, walkers), FLOAT
        found["drift"] = (self.n_components, n_blocks), FLOAT
        return found

    def chain(self) -> dict[str, tuple[Shape, str]]:
        """Shape and type of every dataset in ``checkpoint/COMPONENT``."""
        groups = -(-self.schedule.n_walkers // LANES)
        positions = (groups, self.n_electrons, LANES)
        return {"a": (positions, FLOAT), "b": (positions, FLOAT), "words": ((groups, 4, LANES), WORD)}


def read_json(file: h5py.File) -> Any:
    """The keys that `storage.write_config` wrote, valid or not."""

    def refuse(constant: str) -> None:
        raise ValueError(constant)

    try:
        return json.loads(text(file, "config", LONGEST_CONFIG), parse_constant=refuse)
    except (ValueError, RecursionError):
        raise Unexpected("its configuration is not JSON") from None


def read_config(file: h5py.File) -> dict[str, Any]:
    """The resolved configuration of a file, valid and with every default filled in."""
    try:
        return resolved(config_from_resolved(read_json(file)))
    except ConfigError as fault:
        raise Unexpected(f"its configuration is not valid: {fault.faults[0]}") from None


def read_contents(file: h5py.File, keys: Mapping[str, Any], size: int) -> tuple[Blocks, list[ChainState], float, bool]:
    """Blocks, chains, seconds and whether the run is complete, of a file of ``size`` bytes with this configuration."""
    require_names(file, PARTS)
    try:
        layout = Layout.of(keys)
    except GeometryError as fault:
        raise Unexpected(f"its configuration is not valid: {fault}") from None
    places = _places(file)
    if len(places) != layout.n_components:
        raise Unexpected(f"it holds {len(places)} chains; its configuration has {layout.n_components}")
    n_blocks = number(places[0], "blocks_done", INTEGER)
    ending = ending_of(keys["sampling"], layout.schedule)
    if not 1 <= n_blocks <= ending.most_blocks:
        raise Unexpected(f"it holds {n_blocks} blocks; its configuration has {ending.most_blocks}")
    complete, seconds = number(file, "complete", FLAG), number(file, "seconds", FLOAT)
    if (complete and n_blocks < ending.first_blocks) or seconds < 0.0:
        raise Unexpected("what it says of its length and time cannot be")
    _require_size([*layout.blocks(n_blocks).values(), *layout.n_components * [*layout.chain().values()]], size)
    return _blocks(file, layout, n_blocks), [_chain(place, layout, n_blocks) for place in places], seconds, complete


def read_chains(file: h5py.File, keys: Mapping[str, Any], size: int) -> list[ChainState]:
    """Chains of a file of ``size`` bytes, as many as it holds, before their first block."""
    layout = Layout.of(keys)
    places = _places(file)[: layout.n_components]
    _require_size(len(places) * [*layout.chain().values()], size)
    return [_chain(place, layout, 0) for place in places]


def _places(file: h5py.File) -> list[h5py.Group]:
    checkpoint = member(file, "checkpoint", h5py.Group)
    names = [str(index) for index in range(len(checkpoint))]
    require_names(checkpoint, names)
    return [member(checkpoint, name, h5py.Group) for name in names]


def _require_size(wanted: Sequence[tuple[Shape, str]], size: int) -> None:
    needed = sum(8 * math.prod(shape) for shape, _ in wanted)
    if needed > size:
        raise Unexpected(f"it needs {needed} bytes for what its configuration says, but has {size}")


def _blocks(file: h5py.File, layout: Layout, n_blocks: int) -> Blocks:
    group = member(file, "blocks", h5py.Group)
    require_names(group, ("means", "counts", "trace", "accepted", "drift"))
    groups = {kind: member(group, kind, h5py.Group) for kind in ("means", "counts")}
    found: dict[str, Any] = {"means": {}, "counts": {}}
    for name, (shape, dtype) in layout.blocks(n_blocks).items():
        kind, _, quantity = name.rpartition("/")
        if not kind:
            found[name] = array(group, name, shape, dtype)
        elif name not in _OPTIONAL or quantity in groups[kind]:
            found[kind][quantity] = array(groups[kind], quantity, shape, dtype)
    for kind, inner in groups.items():
        require_names(inner, found[kind])
    if any((counts < 0).any() for counts in found["counts"].values()):
        raise Unexpected("it holds negative counts")
    if (found["accepted"] < 0.0).any() or (found["accepted"] > 1.0).any() or (found["drift"] < 0.0).any():
        raise Unexpected("acceptance or drift of its blocks cannot be")
    return Blocks(**found)


def _chain(place: h5py.Group, layout: Layout, n_blocks: int) -> ChainState:
    require_names(place, layout.chain())
    arrays = {name: array(place, name, shape, dtype) for name, (shape, dtype) in layout.chain().items()}
    step, done = number(place, "step", FLOAT), number(place, "blocks_done", INTEGER)
    if done != n_blocks or step <= 0.0 or not arrays["words"].any(axis=1).all():
        raise Unexpected(f"the checkpoint {place.name} cannot be continued")
    return ChainState(WalkerArrays(**arrays), step, done)
