"""Run the walkers of one configuration and keep what they measured in one file."""

from __future__ import annotations

import secrets
import time
from pathlib import Path
from typing import Any, NoReturn

import numpy as np

from mcgeo.errors import RunInterrupted, StorageError
from mcgeo.runs.build import schedule_from
from mcgeo.runs.config import UNRELATED_TO_RESULTS, Config, differing_keys, resolved
from mcgeo.runs.experiment import experiment_of, result_class
from mcgeo.runs.lock import run_lock
from mcgeo.runs.progress import Progress, say
from mcgeo.runs.sampled import Blocks, Sampled
from mcgeo.runs.save_clock import SaveClock
from mcgeo.runs.signals import StopFlag, stop_on_signals
from mcgeo.runs.storage import read_result, write_result
from mcgeo.sampling.blocks import BlockRecord, Interrupted
from mcgeo.sampling.chain import equilibrated, next_block

LIQUID_FILE = "liquid.h5"
_SECTIONS = ("state", "geometry", "cell", "sampling")


def sample(config: Config, folder: Path, *, overwrite: bool = False, quiet: bool = False) -> Sampled:
    """The sampled liquid of a configuration: read when it is there, continued when cut short, otherwise run.

    Raises
    ------
    StorageError
        If the folder cannot be written, is being written by another process, or holds a liquid of another
        configuration and ``overwrite`` is not set.
    RunInterrupted
        On Ctrl-C or a request to terminate; whole blocks are in the file.
    """
    path = folder / LIQUID_FILE
    keys = resolved(config)
    earlier = _earlier(path, keys, overwrite)
    if earlier is None or not earlier.complete:
        with run_lock(path):
            # Another process may have gone on meanwhile.
            earlier = _earlier(path, keys, overwrite)
            if earlier is None or not earlier.complete:
                return _run(keys, path, earlier, quiet)
    if not quiet:
        say(f"{path} holds this liquid already")
    return result_class(keys)(keys, earlier.blocks, earlier.chains, earlier.seconds, True)


def _earlier(path: Path, keys: dict[str, Any], overwrite: bool) -> Sampled | None:
    """What the folder holds of this liquid; its seed is taken over into ``keys``."""
    if overwrite or not path.exists():
        return None
    earlier = read_result(path)
    _require_same(path, keys, earlier)
    keys["sampling"]["seed"] = earlier.resolved["sampling"]["seed"]
    return earlier


def _run(keys: dict[str, Any], path: Path, earlier: Sampled | None, quiet: bool) -> Sampled:
    if keys["sampling"]["seed"] is None:
        keys["sampling"]["seed"] = secrets.randbits(63)
    return _Run(keys, path, earlier, quiet).finish()


def _require_same(path: Path, keys: dict[str, Any], earlier: Sampled) -> None:
    """What changes no result does not matter, and a seed left open agrees with whichever was drawn."""
    stored = {section: dict(earlier.resolved.get(section) or {}) for section in _SECTIONS}
    wanted = {section: dict(keys.get(section) or {}) for section in _SECTIONS}
    for group in (stored, wanted):
        for key in UNRELATED_TO_RESULTS:
            group["sampling"].pop(key, None)
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

    def __init__(self, keys: dict[str, Any], path: Path, earlier: Sampled | None, quiet: bool) -> None:
        self._keys, self._path, self._earlier, self._quiet = keys, path, earlier, quiet
        self._experiment = experiment_of(keys)
        states = self._experiment.states
        self._schedules = [schedule_from(keys, state, index) for index, state in enumerate(states)]
        self._records: list[list[BlockRecord]] = []
        self._chains = list(earlier.chains) if earlier is not None else []
        self._seconds = earlier.seconds if earlier is not None else 0.0

    def finish(self) -> Sampled:
        """All blocks that are missing."""
        n_blocks = self._schedules[0].n_blocks
        with stop_on_signals() as stop:
            self._equilibrate(stop)
            clock = SaveClock(self._keys["sampling"]["checkpoint_seconds"])
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
                    if clock.due:
                        with clock.writing():
                            self._save(complete=False)
        return self._save(complete=True)

    def _equilibrate(self, stop: StopFlag) -> None:
        if self._chains:
            return
        first = self._schedules[0]
        if not self._quiet:
            say(f"equilibrating {first.n_walkers} walkers on {first.threads} threads")
        for state, schedule in zip(self._experiment.states, self._schedules, strict=True):
            try:
                self._chains.append(equilibrated(state, schedule, stop))
            except Interrupted:
                self._give_up(stop, 0)

    def _one_block(self, stop: StopFlag) -> None:
        steps = [
            next_block(state, measurement, schedule, chain, stop)
            for state, measurement, schedule, chain in zip(
                self._experiment.states, self._experiment.measurements, self._schedules, self._chains, strict=True
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

    def _save(self, *, complete: bool) -> Sampled:
        blocks = Blocks.from_records(self._records, self._experiment.trace_offset) if self._records else None
        if self._earlier is not None:
            blocks = self._earlier.blocks.followed_by(blocks) if blocks else self._earlier.blocks
        assert blocks is not None
        result = self._experiment.result(self._keys, blocks, self._chains, self._seconds, complete)
        write_result(self._path, result)
        return result
