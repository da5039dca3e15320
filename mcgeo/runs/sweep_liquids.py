"""The samplings in a sweep's folder, and how far they are."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any, NamedTuple

import h5py

from mcgeo.kernels.lanes import LANES
from mcgeo.runs.catalogue import KIND
from mcgeo.runs.checked_hdf5 import Unexpected
from mcgeo.runs.parts import held_parts
from mcgeo.runs.result_layout import read_json
from mcgeo.runs.sample import LIQUID_FILE

LIQUIDS = "liquids"


class LiquidProgress(NamedTuple):
    """How far the sampling of a liquid has come.

    Attributes
    ----------
    blocks : int
        Kept so far.
    complete : bool
        Whether these are all.
    core_seconds : float
        What they took, in time of one core.
    """

    blocks: int
    complete: bool
    core_seconds: float


def liquid_progress(folder: Path, liquid: str) -> LiquidProgress:
    """How far a liquid of a sweep's folder is, as of its last checkpoint; one in parts is as far as its last part."""
    place = folder / LIQUIDS / liquid
    whole = file_progress(place / LIQUID_FILE)
    parts = [] if whole.blocks else [file_progress(path) for path in held_parts(place)]
    if not parts:
        return whole
    return LiquidProgress(min(part.blocks for part in parts), False, sum(part.core_seconds for part in parts))


def file_progress(path: Path) -> LiquidProgress:
    """How far a result file is; one that cannot be read counts as none."""
    try:
        with h5py.File(path, "r") as file:
            sampling = read_json(file)["sampling"]
            cores = min(sampling["threads"] or 1, -(-sampling["walkers"] // LANES))
            seconds = cores * float(file.attrs["seconds"])
            return LiquidProgress(len(file["blocks/drift"][0]), bool(file.attrs["complete"]), seconds)
    except (OSError, KeyError, ValueError, Unexpected):
        return LiquidProgress(0, False, 0.0)


def needs_sampling(folder: Path, liquid: str, state: Mapping[str, Any]) -> bool:
    """Whether optima of a liquid have to wait for its sampling; those of the catalogue never do.

    Parameters
    ----------
    state : mapping
        Resolved keys of ``state``.
    """
    return bool(state["kind"] != KIND) and not liquid_progress(folder, liquid).complete
