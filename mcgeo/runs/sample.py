"""Run the walkers of one configuration and keep what they measured in one file."""

from __future__ import annotations

import secrets
import time
from pathlib import Path
from typing import Any, NoReturn

import numpy as np

from mcgeo.errors import RunInterrupted, StorageError
from mcgeo.estimate.torus_energy import torus_energy
from mcgeo.problem.interaction import Coulomb
from mcgeo.runs.build import schedule_from, torus_frame, torus_states
from mcgeo.runs.config import Config, differing_keys, resolved
from mcgeo.runs.liquid import Blocks, Liquid
from mcgeo.runs.progress import Progress, say
from mcgeo.runs.signals import StopFlag, stop_on_signals
from mcgeo.runs.storage import read_liquid, write_liquid
from mcgeo.sampling.chain import equilibrated, next_block
from mcgeo.sampling.measurement import BlockRecord, Interrupted, torus_measurement

LIQUID_FILE = "liquid.h5"
_SECTIONS = ("state", "geometry", "cell", "sampling")
_SECONDS_BETWEEN_SAVES = 60.0


def sample(config: Config, folder: Path, *, overwrite: bool = False, quiet: bool = False) -> Liquid:
    """The sampled liquid of a configuration: read when it is there, continued when cut short, otherwise run.

    Raises
    ------
    StorageError
        If the folder holds a liquid of another configuration and ``overwrite`` is not set.
    RunInterrupted
        On Ctrl-C or a request to terminate; whole blocks are in the file.
    """
    path = folder / LIQUID_FILE
    keys = resolved(config)
    earlier = None
    if path.exists() and not overwrite:
        earlier = read_liquid(path)
        _require_same(path, keys, earlier)
        keys["sampling"]["seed"] = earlier.resolved["sampling"]["seed"]
        if earlier.complete:
            if not quiet:
                say(f"{path} holds this liquid already")
            return Liquid(keys, earlier.blocks, earlier.chains, earlier.seconds, True)
    if keys["sampling"]["seed"] is None:
        keys["sampling"]["seed"] = secrets.randbits(63)
    return _Run(keys, path, earlier, quiet).finish()


def _require_same(path: Path, keys: dict[str, Any], earlier: Liquid) -> None:
    """Threads do not matter, and a seed left open agrees with whichever was drawn."""
    stored = {section: dict(earlier.resolved.get(section) or {}) for section in _SECTIONS}
    wanted = {section: dict(keys.get(section) or {}) for section in _SECTIONS}
    for group in (stored, wanted):
        group["sampling"].pop("threads", None)
        if keys["sampling"]["seed"] is None:
            group["sampling"].pop("seed", None)
    differences = differing_keys(stored, wanted, _SECTIONS)
    if differences:
        listed = "\n  ".join(differences)
        raise StorageError(
            f"{path} holds another liquid (in the file and wanted):\n  {listed}\n"
            "choose another folder with --out, or replace it with --overwrite"
        )


class _Run:
    """One run: a chain per component, advanced block by block in turn."""

    def __init__(self, keys: dict[str, Any], path: Path, earlier: Liquid | None, quiet: bool) -> None:
        self._keys, self._path, self._earlier, self._quiet = keys, path, earlier, quiet
        frame = torus_frame(keys)
        self._states = torus_states(keys)
        self._schedules = [schedule_from(keys, state, index) for index, state in enumerate(self._states)]
        q_max = keys["sampling"]["q_max"]
        energy = torus_energy(frame, q_max, Coulomb())
        waves = frame.waves(q_max)
        self._measurements = [torus_measurement(state, waves, energy.weights) for state in self._states]
        # The trace is sum_q w S(q); the energy has S - 1 and the cell's constant.
        self._trace_offset = energy.constant - float(energy.weights.sum())
        self._records: list[list[BlockRecord]] = []
        self._chains = earlier.chains if earlier is not None else []
        self._seconds = earlier.seconds if earlier is not None else 0.0

    def finish(self) -> Liquid:
        """All blocks that are missing."""
        n_blocks = self._schedules[0].n_blocks
        with stop_on_signals() as stop:
            self._equilibrate(stop)
            last_save = time.monotonic()
            done = self._chains[0].blocks_done
            with Progress(n_blocks, done, self._quiet) as progress:
                for block in range(done, n_blocks):
                    started = time.monotonic()
                    try:
                        self._one_block(stop)
                    except Interrupted:
                        self._give_up(stop, block)
                    self._seconds += time.monotonic() - started
                    progress.step(f"acceptance {np.mean([r.accepted.mean() for r in self._records[-1]]):.3f}")
                    if time.monotonic() - last_save > _SECONDS_BETWEEN_SAVES:
                        self._save(complete=False)
                        last_save = time.monotonic()
        return self._save(complete=True)

    def _equilibrate(self, stop: StopFlag) -> None:
        if self._chains:
            return
        first = self._schedules[0]
        if not self._quiet:
            say(
                f"equilibrating {first.n_walkers} walkers on {first.threads} threads "
                "(kernels are compiled once, which takes some seconds)"
            )
        for state, schedule in zip(self._states, self._schedules, strict=True):
            self._chains.append(equilibrated(state, schedule))
            if stop.is_set():
                self._give_up(stop, 0)

    def _one_block(self, stop: StopFlag) -> None:
        steps = [
            next_block(measurement, schedule, chain, stop)
            for measurement, schedule, chain in zip(
                self._measurements, self._schedules, self._chains, strict=True
            )
        ]
        self._chains = [chain for chain, _ in steps]
        self._records.append([record for _, record in steps])

    def _give_up(self, stop: StopFlag, blocks_done: int) -> NoReturn:
        if blocks_done:
            self._save(complete=False)
            said = f"{blocks_done} whole blocks are in {self._path}; the same command goes on from there"
        else:
            said = "not one block was whole yet, nothing is kept"
        raise RunInterrupted(f"interrupted: {said}", stop.signal_number)

    def _save(self, *, complete: bool) -> Liquid:
        liquid = Liquid(self._keys, self._blocks(), self._chains, self._seconds, complete)
        write_liquid(self._path, liquid)
        return liquid

    def _blocks(self) -> Blocks:
        """The earlier blocks and the new ones; components are averaged walker by walker."""
        new = self._records
        fresh = Blocks(
            np.array([np.mean([r.structure for r in block], axis=0) for block in new]),
            np.array([np.sum([r.pair_counts for r in block], axis=0) for block in new]),
            np.array([[r.trace for r in block] for block in new]).swapaxes(0, 1) + self._trace_offset,
            np.array([[r.accepted for r in block] for block in new]).swapaxes(0, 1),
            np.array([[r.drift for r in block] for block in new]).T,
        )
        if self._earlier is None:
            return fresh
        old = self._earlier.blocks
        return Blocks(
            np.concatenate([old.structure, fresh.structure]),
            np.concatenate([old.pair_counts, fresh.pair_counts]),
            np.concatenate([old.trace, fresh.trace], axis=1),
            np.concatenate([old.accepted, fresh.accepted], axis=1),
            np.concatenate([old.drift, fresh.drift], axis=1),
        )
