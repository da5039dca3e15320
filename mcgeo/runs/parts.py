"""One liquid's walkers in parts that run apart, on as many machines as there are parts, and come together again.

First `equilibrate` brings all walkers to equilibrium and tunes their step; then every `sample_part` runs a contiguous
range of the groups of eight walkers from there, none knowing of the others; then `merge_parts` makes the result file,
the same to the last bit as that of `mcgeo.runs.sample.sample`. Each of the three goes on where it was cut short, and
does nothing where its work is done.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from contextlib import nullcontext
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np

from mcgeo.errors import ConfigError, StorageError
from mcgeo.kernels.lanes import LANES
from mcgeo.runs.config import Config, resolved
from mcgeo.runs.experiment import experiment_of
from mcgeo.runs.length import require_same_run
from mcgeo.runs.lock import run_lock
from mcgeo.runs.production import Production, Standing
from mcgeo.runs.sample import LIQUID_FILE, held_liquid
from mcgeo.runs.sampled import Blocks, Sampled
from mcgeo.runs.signals import StopFlag, stop_on_signals
from mcgeo.runs.start import START_FILE, equilibrated_chains, held_start
from mcgeo.runs.storage import previous_file, read_result, write_result
from mcgeo.sampling.chain import ChainState
from mcgeo.sampling.walkers import WalkerArrays

Keys = dict[str, Any]


def part_path(folder: Path, part: int, n_parts: int) -> Path:
    """Result file of one part, which counts from 0."""
    return folder / f"part_{part}_of_{n_parts}.h5"


def held_parts(folder: Path) -> list[Path]:
    """Result files of parts in a folder, whatever the division."""
    return sorted(path for path in folder.glob("part_*_of_*.h5") if path.stem.rpartition("_")[2].isdecimal())


def group_range(n_walkers: int, part: int, n_parts: int) -> range:
    """Groups of eight walkers of one part, which counts from 0.

    Raises
    ------
    ConfigError
        If there are fewer groups than parts.
    """
    n_groups = -(-n_walkers // LANES)
    if not 1 <= n_parts <= n_groups:
        raise ConfigError(
            [
                f"sampling.walkers: {n_walkers} walkers are {n_groups} groups of {LANES}, which cannot be dealt into "
                f"{n_parts} parts; give walkers for a group in each"
            ]
        )
    return range(part * n_groups // n_parts, (part + 1) * n_groups // n_parts)


def require_divisible(keys: Mapping[str, Any], n_parts: int = 1) -> None:
    """Refuse what cannot run in so many parts.

    Raises
    ------
    ConfigError
        If the seed is left open, if the length is, or if there are fewer groups of walkers than parts.
    """
    sampling = keys["sampling"]
    if sampling["seed"] is None:
        raise ConfigError(["sampling.seed: must be given for a run in parts, which all draw from it"])
    if sampling["target_error"] is not None:
        raise ConfigError(
            ["sampling.target_error: must be null for a run in parts, none of which knows the error of the whole"]
        )
    group_range(sampling["walkers"], 0, n_parts)


def _keys(config: Config) -> Keys:
    keys = resolved(config)
    require_divisible(keys)
    return keys


def _part_keys(keys: Mapping[str, Any], groups: range) -> Keys:
    """The configuration as the part's own file states it: as many walkers as the part has."""
    walkers = min(groups.stop * LANES, keys["sampling"]["walkers"]) - groups.start * LANES
    return {**keys, "sampling": {**keys["sampling"], "walkers": walkers}}


def equilibrate(config: Config, folder: Path, *, quiet: bool = False, stop: StopFlag | None = None) -> None:
    """All walkers in equilibrium and their step tuned and frozen, in a file in ``folder``.

    Parameters
    ----------
    stop : StopFlag, optional
        Set by the caller to end early; signals are then the caller's concern.

    Raises
    ------
    ConfigError
        As `require_divisible`.
    StorageError
        If the file cannot be written, or is being written by another process.
    RunInterrupted
        On Ctrl-C or a request to terminate; finished components are kept.
    """
    keys = _keys(config)
    path = folder / START_FILE
    with run_lock(path), stop_on_signals() if stop is None else nullcontext(stop) as flag:
        equilibrated_chains(path, keys, experiment_of(keys), flag, quiet)


def sample_part(
    config: Config, folder: Path, part: int, n_parts: int, *, quiet: bool = False, stop: StopFlag | None = None
) -> None:
    """Production of one part, which counts from 0, in a file of its own in ``folder``.

    Parameters
    ----------
    stop : StopFlag, optional
        Set by the caller to end early; signals are then the caller's concern.

    Raises
    ------
    ConfigError
        As `require_divisible`.
    StorageError
        If the walkers are not equilibrated, or the part's file cannot be written, is being written by another process
        or belongs to another configuration.
    RunInterrupted
        On Ctrl-C or a request to terminate; whole blocks are in the file.
    """
    keys = _keys(config)
    groups = group_range(keys["sampling"]["walkers"], part, n_parts)
    part_keys = _part_keys(keys, groups)
    path = part_path(folder, part, n_parts)
    with run_lock(path), stop_on_signals() if stop is None else nullcontext(stop) as flag:
        earlier = _held_part(path, part_keys)
        if earlier is not None and earlier.complete:
            return
        experiment = experiment_of(keys)
        if earlier is not None:
            standing = Standing.of(earlier)
        else:
            standing = Standing(_start_of(folder, keys, groups, len(experiment.states)))
        Production(part_keys, path, experiment, standing, quiet=quiet).finish(flag)


def _held_part(path: Path, part_keys: Mapping[str, Any]) -> Sampled | None:
    if not path.exists():
        return None
    earlier = read_result(path)
    require_same_run(path, part_keys, earlier)
    return earlier


def _start_of(folder: Path, keys: Mapping[str, Any], groups: range, n_components: int) -> list[ChainState]:
    chains = held_start(folder / START_FILE, keys)
    if len(chains) < n_components:
        raise StorageError(f"{folder / START_FILE}: holds no equilibrated walkers of this configuration")
    return [replace(chain, walkers=_chosen(chain.walkers, groups)) for chain in chains]


def _chosen(walkers: WalkerArrays, groups: range) -> WalkerArrays:
    span = slice(groups.start, groups.stop)
    return WalkerArrays(walkers.a[span], walkers.b[span], walkers.words[span])


def merge_parts(config: Config, folder: Path, n_parts: int) -> Sampled:
    """The liquid of all parts in ``folder``, whose files it replaces.

    Raises
    ------
    ConfigError
        As `require_divisible`.
    StorageError
        If a part is missing, unfinished or of another configuration, or the file cannot be written.
    """
    keys = _keys(config)
    path = folder / LIQUID_FILE
    paths = [part_path(folder, part, n_parts) for part in range(n_parts)]
    with run_lock(path):
        result = held_liquid(config, path)
        if result is None:
            result = _merged(keys, paths)
            write_result(path, result)
        # Those of another division too, which a change of it has left.
        held = held_parts(folder)
        for done in (*held, *map(previous_file, held), folder / START_FILE):
            done.unlink(missing_ok=True)
    return result


def _merged(keys: Keys, paths: Sequence[Path]) -> Sampled:
    parts = []
    for part, path in enumerate(paths):
        found = _held_part(path, _part_keys(keys, group_range(keys["sampling"]["walkers"], part, len(paths))))
        if found is None or not found.complete:
            done = f"{found.n_blocks} of {keys['sampling']['blocks']} blocks" if found else "no such file"
            raise StorageError(f"{path}: part {part + 1} of {len(paths)} is not finished: {done}")
        parts.append(found)
    blocks = Blocks.side_by_side([part.blocks for part in parts])
    chains = [_joined(chains) for chains in zip(*(part.chains for part in parts), strict=True)]
    seconds = sum(part.seconds for part in parts)
    return experiment_of(keys).result(keys, blocks, chains, seconds, True)


def _joined(chains: Sequence[ChainState]) -> ChainState:
    walkers = [chain.walkers for chain in chains]
    arrays = WalkerArrays(
        np.concatenate([w.a for w in walkers]),
        np.concatenate([w.b for w in walkers]),
        np.concatenate([w.words for w in walkers]),
    )
    return replace(chains[0], walkers=arrays)
