"""Equilibrated walkers in a file of their own, from which production starts."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import h5py

from mcgeo.errors import RunInterrupted, StorageError
from mcgeo.kernels.lanes import LANES
from mcgeo.runs.build import schedule_from
from mcgeo.runs.experiment import Experiment
from mcgeo.runs.progress import say
from mcgeo.runs.signals import StopFlag
from mcgeo.runs.storage import read_chains, write_chains, written_file
from mcgeo.sampling.blocks import Interrupted
from mcgeo.sampling.chain import ChainState, equilibrated

START_FILE = "equilibrated.h5"
_FORMAT = "mcgeo-start/1"
_SECTIONS = ("state", "geometry", "cell")
# What the walkers' way to equilibrium depends on.
_SAMPLING_KEYS = ("walkers", "equilibration", "step", "seed")


def _identity(keys: Mapping[str, Any]) -> dict[str, Any]:
    sampling = {key: keys["sampling"][key] for key in _SAMPLING_KEYS}
    return {**{section: keys.get(section) for section in _SECTIONS}, "sampling": sampling}


def _read(path: Path) -> tuple[dict[str, Any], list[ChainState]] | None:
    """What the file holds; None where there is none, or one that cannot be read: equilibrating again replaces it."""
    try:
        with h5py.File(path, "r") as file:
            if file.attrs.get("format") == _FORMAT:
                return json.loads(file.attrs["config"]), read_chains(file)
    except (OSError, KeyError, ValueError, TypeError, RuntimeError, StorageError):
        pass
    return None


def seed_of_start(path: Path, keys: Mapping[str, Any]) -> int | None:
    """Seed of the walkers in the file if they are those of the configuration, whose seed is left open."""
    found = _read(path)
    if found is None:
        return None
    seed = found[0]["sampling"]["seed"]
    wanted = _identity({**keys, "sampling": {**keys["sampling"], "seed": seed}})
    return int(seed) if found[0] == wanted else None


def held_start(path: Path, keys: Mapping[str, Any], experiment: Experiment) -> list[ChainState]:
    """Chains of the configuration that the file holds, from the first component on; fewer than all when cut short."""
    found = _read(path)
    if found is None or found[0] != _identity(keys):
        return []
    n_groups = -(-keys["sampling"]["walkers"] // LANES)
    shapes = [(n_groups, state.n_electrons, LANES) for state in experiment.states]
    chains = found[1][: len(shapes)]
    fit = all(chain.walkers.a.shape == shape for chain, shape in zip(chains, shapes, strict=False))
    return chains if fit else []


def equilibrated_chains(
    path: Path, keys: Mapping[str, Any], experiment: Experiment, stop: StopFlag, quiet: bool
) -> list[ChainState]:
    """Chains in equilibrium, those of finished components from the file; after each one the file is written anew.

    Raises
    ------
    RunInterrupted
        When ``stop`` was set meanwhile; finished components are in the file.
    """
    chains = held_start(path, keys, experiment)
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
        with written_file(path) as file:
            file.attrs["format"] = _FORMAT
            file.attrs["config"] = json.dumps(_identity(keys))
            write_chains(file, chains)
    return chains
