"""Walkers advanced block by block, and the file that keeps what they measured."""

from __future__ import annotations

import math
import time
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, NoReturn

import numpy as np

from mcgeo.errors import NumericalError, RunInterrupted
from mcgeo.runs.build import schedule_from
from mcgeo.runs.ending import ending_of
from mcgeo.runs.experiment import Experiment
from mcgeo.runs.progress import Progress
from mcgeo.runs.sampled import Blocks, Sampled
from mcgeo.runs.save_clock import SaveClock
from mcgeo.runs.signals import StopFlag
from mcgeo.runs.storage import write_result
from mcgeo.sampling.blocks import BlockRecord, Interrupted
from mcgeo.sampling.chain import ChainState, next_block


@dataclass(frozen=True, eq=False)
class Standing:
    """Where a run stands.

    Attributes
    ----------
    chains : sequence of ChainState
        One per component.
    blocks : Blocks or None
        None before the first block.
    seconds : float
    """

    chains: Sequence[ChainState]
    blocks: Blocks | None = None
    seconds: float = 0.0

    @classmethod
    def of(cls, result: Sampled) -> Standing:
        """Where the run of a file stands."""
        return cls(result.chains, result.blocks, result.seconds)


class Production:
    """One run: a chain per component, advanced block by block in turn.

    Parameters
    ----------
    keys : mapping
        Resolved configuration; its ``sampling`` says when to end.
    path : Path
        The result file.
    experiment : Experiment
    standing : Standing
    quiet : bool
    resume : str
        What the user does to go on after an interruption, in words.
    """

    def __init__(
        self,
        keys: dict[str, Any],
        path: Path,
        experiment: Experiment,
        standing: Standing,
        *,
        quiet: bool,
        resume: str = "the same command",
    ) -> None:
        self._keys, self._path, self._experiment, self._quiet = keys, path, experiment, quiet
        self._resume = resume
        self._schedules = [schedule_from(keys, state, index) for index, state in enumerate(experiment.states)]
        self._ending = ending_of(keys["sampling"], self._schedules[0])
        self._clock = SaveClock(keys["sampling"]["checkpoint_seconds"])
        self._standing = standing
        self._saved_blocks = self._n_blocks
        self._note = ""
        self._records: list[list[BlockRecord]] = []

    @property
    def _n_blocks(self) -> int:
        return self._standing.chains[0].blocks_done

    def finish(self, stop: StopFlag) -> Sampled:
        """All blocks that are missing, and the file.

        Raises
        ------
        RunInterrupted
            When ``stop`` was set meanwhile; whole blocks are in the file.
        NumericalError
            If a walker met what is no number; the blocks before are in the file.
        """
        with Progress(self._ending.expected_blocks(0, math.inf), self._n_blocks, self._quiet) as progress:
            while not self._at_end(progress):
                self._produce(self._ending.look_after(self._n_blocks), stop, progress)
        return self.save(complete=True)

    def _at_end(self, progress: Progress) -> bool:
        """Whether to stop here, asked at the counts at which that is decided."""
        n_blocks, target = self._n_blocks, self._ending.target
        if target is None or not self._ending.is_look(n_blocks):
            return n_blocks >= self._ending.most_blocks
        result = self._result(complete=False)
        error = result.statistical_error(target.quantity)
        progress.expect(self._ending.expected_blocks(n_blocks, error))
        self._note = f", {target.quantity} known to {error:.2g} of {target.error:.2g}"
        return self._ending.satisfied_by(result)

    def _produce(self, n_blocks: int, stop: StopFlag, progress: Progress) -> None:
        """On to so many blocks, with checkpoints on the way."""
        while self._n_blocks < n_blocks:
            if self._n_blocks > self._saved_blocks and self._clock.due:
                with self._clock.writing():
                    self.save(complete=False)
            try:
                acceptance = self._one_block(stop)
            except Interrupted:
                self._give_up(stop)
            except NumericalError as fault:
                if self._n_blocks:
                    self.save(complete=False)
                    raise NumericalError(f"{fault}; the {self._n_blocks} blocks before are in {self._path}") from fault
                raise
            progress.step(f"acceptance {acceptance:.3f}{self._note}")

    def _one_block(self, stop: StopFlag) -> float:
        started = time.monotonic()
        steps = [
            next_block(state, measurement, schedule, chain, stop)
            for state, measurement, schedule, chain in zip(
                self._experiment.states, self._experiment.measurements, self._schedules, self._standing.chains,
                strict=True,
            )
        ]  # fmt: skip
        self._records.append([record for _, record in steps])
        seconds = self._standing.seconds + time.monotonic() - started
        self._standing = replace(self._standing, chains=[chain for chain, _ in steps], seconds=seconds)
        return float(np.mean([record.accepted.mean() for _, record in steps]))

    def _give_up(self, stop: StopFlag) -> NoReturn:
        if self._n_blocks:
            self.save(complete=False)
            said = f"{self._n_blocks} whole blocks are in {self._path}; {self._resume} goes on from there"
        else:
            said = f"not one block was whole yet; {self._resume} goes on from the equilibrated walkers"
        raise RunInterrupted(f"interrupted: {said}", stop.signal_number)

    def save(self, *, complete: bool) -> Sampled:
        """Write the file; what it holds."""
        result = self._result(complete)
        write_result(self._path, result)
        self._saved_blocks = result.n_blocks
        return result

    def _result(self, complete: bool) -> Sampled:
        """All blocks so far."""
        blocks = self._standing.blocks
        if self._records:
            later = Blocks.from_records(self._records, self._experiment.trace_offset)
            blocks = blocks.followed_by(later) if blocks else later
            self._records.clear()
            self._standing = replace(self._standing, blocks=blocks)
        assert blocks is not None
        standing = self._standing
        return self._experiment.result(self._keys, blocks, list(standing.chains), standing.seconds, complete)
