"""Equilibrated walkers in a file of their own, from which production starts."""

from __future__ import annotations

from collections.abc import Mapping
from contextlib import suppress
from pathlib import Path
from typing import Any

from mcgeo.errors import RunInterrupted, StorageError
from mcgeo.runs.build import schedule_from
from mcgeo.runs.experiment import Experiment
from mcgeo.runs.progress import say
from mcgeo.runs.result_layout import read_chains, read_json
from mcgeo.runs.signals import StopFlag
from mcgeo.runs.storage import opened_file, write_chains, write_config, written_file
from mcgeo.sampling.blocks import Interrupted
from mcgeo.sampling.chain import ChainState, equilibrated

START_FILE = "equilibrated.h5"
_FORMAT = "mcgeo-start/2"
_SECTIONS = ("state", "geometry", "cell")
# What the walkers' way to equilibrium depends on.
_SAMPLING_KEYS = ("walkers", "equilibration", "step", "seed")


def _identity(keys: Mapping[str, Any]) -> dict[str, Any]:
    sampling = {key: keys["sampling"][key] for key in _SAMPLING_KEYS}
    return {**{section: keys.get(section) for section in _SECTIONS}, "sampling": sampling}


def seed_of_start(path: Path, keys: Mapping[str, Any]) -> int | None:
    """Seed of the walkers in the file if they are those of the configuration, whose seed is left open."""
    with suppress(StorageError), opened_file(path, _FORMAT) as file:
        found = read_json(file)
        seed = found["sampling"]["seed"]
        if found == _identity({**keys, "sampling": {**keys["sampling"], "seed": seed}}):
            return int(seed)
    return None


def held_start(path: Path, keys: Mapping[str, Any]) -> list[ChainState]:
    """Chains of the configuration that the file holds, from the first component on; fewer than all when cut short.

    None where there is no file, or one that cannot be read: equilibrating again replaces it.
    """
    with suppress(StorageError), opened_file(path, _FORMAT) as file:
        if read_json(file) == _identity(keys):
            return read_chains(file, keys, path.stat().st_size)
    return []


def equilibrated_chains(
    path: Path, keys: Mapping[str, Any], experiment: Experiment, stop: StopFlag, quiet: bool
) -> list[ChainState]:
    """Chains in equilibrium, those of finished components from the file; after each one the file is written anew.

    Raises
    ------
    RunInterrupted
        When ``stop`` was set meanwhile; finished components are in the file.
    """
    chains = held_start(path, keys)
    n_components = len(experiment.states)
    for index in range(len(chains), n_components):
        schedule = schedule_from(keys, experiment.states[index], index)
        if not quiet:
            of = f", component {index + 1} of {n_components}" if n_components > 1 else ""
            say(f"equilibrating {schedule.n_walkers} walkers on {schedule.threads} threads{of}")
        try:
            chains.append(equilibrated(experiment.states[index], schedule, stop))
        except Interrupted:
            kept = f"{len(chains)} of {n_components} components are equilibrated, and kept"
            said = kept if chains else "not one block was whole yet, nothing is kept"
            raise RunInterrupted(f"interrupted: {said}", stop.signal_number) from None
        with written_file(path, _FORMAT) as file:
            write_config(file, _identity(keys))
            write_chains(file, chains)
    return chains
