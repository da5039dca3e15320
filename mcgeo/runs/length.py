"""How long a run is, and when a file is the same run: the one asked for, a part of it or more of it."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from mcgeo.errors import StorageError
from mcgeo.runs.build import schedule_from
from mcgeo.runs.config import UNRELATED_TO_RESULTS, differing_keys
from mcgeo.runs.ending import blocks_of, ending_of
from mcgeo.runs.experiment import result_class
from mcgeo.runs.sampled import Sampled

Keys = dict[str, Any]

_SECTIONS = ("state", "geometry", "cell", "sampling")
# With blocks of one length these say where the run ends, and nothing about what comes before.
_LENGTH_KEYS = ("sweeps", "blocks", "target_error", "target_quantity", "most_sweeps")


def require_same_run(path: Path, keys: Mapping[str, Any], earlier: Sampled) -> None:
    """Refuse a file that is no part of the run asked for, and is none that begins with it.

    What changes no result does not matter, a seed left open agrees with whichever was drawn, and a run of more blocks
    of the same length begins with the blocks of the shorter one.

    Raises
    ------
    StorageError
        With the keys that differ.
    """
    stored, wanted = _identity(earlier.resolved), _identity(keys)
    if keys["sampling"]["seed"] is None:
        for group in (stored, wanted):
            del group["sampling"]["seed"]
    other = differing_keys(_without_length(stored), _without_length(wanted), _SECTIONS)
    if not other and _same_blocks(keys, earlier):
        return
    hint = "" if other else "; to make the liquid in the file longer use --extend SWEEPS with the configuration it had"
    listed = "\n  ".join(other or differing_keys(stored, wanted, _SECTIONS))
    raise StorageError(
        f"{path} holds another liquid (in the file and wanted):\n  {listed}\n"
        f"choose another folder with --out, or replace it with --overwrite{hint}"
    )


def _identity(keys: Mapping[str, Any]) -> dict[str, Keys]:
    found = {section: dict(keys.get(section) or {}) for section in _SECTIONS}
    for key in UNRELATED_TO_RESULTS:
        found["sampling"].pop(key, None)
    return found


def _without_length(identity: Mapping[str, Keys]) -> dict[str, Keys]:
    sampling = {key: value for key, value in identity["sampling"].items() if key not in _LENGTH_KEYS}
    return {**identity, "sampling": sampling}


def _same_blocks(keys: Mapping[str, Any], earlier: Sampled) -> bool:
    wanted = schedule_from({"sampling": {**keys["sampling"], "seed": 0}}, earlier.sampled_states[0])
    stored = earlier.schedule
    return (wanted.measurements_per_block, wanted.sweeps_between) == (
        stored.measurements_per_block,
        stored.sweeps_between,
    )


def continued(path: Path, keys: Keys, earlier: Sampled) -> Keys:
    """Keys of the run, from file and configuration: the seed that was drawn, and the longer of the two lengths.

    Raises
    ------
    StorageError
        As `require_same_run`.
    """
    require_same_run(path, keys, earlier)
    stored, wanted = earlier.resolved["sampling"], keys["sampling"]
    length = {key: wanted[key] for key in _LENGTH_KEYS}
    open_end = wanted["target_error"] is not None
    if not earlier.complete and stored["target_error"] is None and (open_end or stored["blocks"] > wanted["blocks"]):
        # It was to be made longer, or that long, and is first given the length that it was asked for.
        length = {key: stored[key] for key in _LENGTH_KEYS}
    elif not open_end and earlier.n_blocks > wanted["blocks"]:
        length = _fixed(earlier, earlier.n_blocks)
    return {**keys, "sampling": {**wanted, "seed": stored["seed"], **length}}


def missing_nothing(keys: Keys, earlier: Sampled) -> Sampled | None:
    """What the file holds, with the problem of the configuration, if the run of ``keys`` needs no block more."""
    result = result_class(keys)(keys, earlier.blocks, earlier.chains, earlier.seconds, True)
    if not earlier.complete or earlier.n_blocks < keys["sampling"]["blocks"]:
        return None
    same = all(keys[section] == earlier.resolved[section] for section in ("sampling", "problem"))
    return result if same or ending_of(keys["sampling"], result.schedule).satisfied_by(result) else None


def _fixed(earlier: Sampled, n_blocks: int) -> Keys:
    """A length of so many of the file's blocks."""
    open_end = dict.fromkeys(_LENGTH_KEYS)
    return {**open_end, "sweeps": n_blocks * earlier.schedule.sweeps_per_block, "blocks": n_blocks}


def extended(path: Path, keys: Keys, earlier: Sampled | None, sweeps: int) -> Keys:
    """Keys of the run that has ``sweeps`` more than the finished one in the file, rounded up to whole blocks.

    Raises
    ------
    StorageError
        If there is no file, if its run is unfinished, and as `require_same_run`.
    """
    if earlier is None:
        raise StorageError(f"{path}: no such file, so there is nothing to extend; leave out --extend to make it")
    require_same_run(path, keys, earlier)
    seed = earlier.resolved["sampling"]["seed"]
    if not earlier.complete:
        raise StorageError(
            f"{path} is unfinished: {blocks_of(earlier)}; the same command without --extend ends it, "
            "then it can be extended"
        )
    n_blocks = earlier.n_blocks - (-sweeps // earlier.schedule.sweeps_per_block)
    return {**keys, "sampling": {**keys["sampling"], "seed": seed, **_fixed(earlier, n_blocks)}}
