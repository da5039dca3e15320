"""The life of a chain: start, equilibrate, tune, freeze, produce block by block."""

from __future__ import annotations

import threading
from dataclasses import dataclass

from mcgeo.sampling.blocks import BlockRecord, Measurement, merged
from mcgeo.sampling.soundness import require_sound_block, require_sound_walkers
from mcgeo.sampling.stopping import advance, sweeps_per_look
from mcgeo.sampling.tuning import tuned_step
from mcgeo.sampling.walkers import WalkerArrays, arrays_of, for_each_group, groups_of, start_walkers
from mcgeo.states.base import SampledState, WalkerGroup


@dataclass(frozen=True)
class Schedule:
    """How long a chain runs.

    Attributes
    ----------
    n_walkers, n_blocks : int
    measurements_per_block, sweeps_between : int
        A block is ``measurements_per_block`` times ``sweeps_between`` sweeps.
    equilibration : int
        Sweeps before production; the step is tuned in their second half.
    step : float or None
        Fixed side of the square proposal (l_B); tuned when None.
    seed, threads : int
    component : int
        Which of the states that make up a liquid; it addresses the random streams.
    """

    n_walkers: int
    n_blocks: int
    measurements_per_block: int
    sweeps_between: int
    equilibration: int
    step: float | None
    seed: int
    threads: int
    component: int = 0

    @property
    def sweeps_per_block(self) -> int:
        """Sweeps of a walker in one block."""
        return self.measurements_per_block * self.sweeps_between


@dataclass(frozen=True)
class ChainState:
    """All that is needed to continue: walkers at the end of a block, the frozen step, the number of blocks done."""

    walkers: WalkerArrays
    step: float
    blocks_done: int


_LEAST_TUNING_SWEEPS = 8


def equilibrated(state: SampledState, schedule: Schedule, stop: threading.Event) -> ChainState:
    """Walkers in equilibrium and a frozen step.

    Raises
    ------
    Interrupted
        When ``stop`` was set meanwhile.
    """
    groups = groups_of(state, start_walkers(state, schedule.n_walkers, schedule.seed, schedule.component))
    first = schedule.step or min(state.first_step, state.largest_step)
    half = schedule.equilibration // 2

    longest = sweeps_per_look(state)

    def run(step: float, n_sweeps: int) -> None:
        for_each_group(lambda group: advance(group, step, n_sweeps, longest, stop), groups, schedule.threads)

    run(first, half)
    step = schedule.step
    if step is None:
        sweeps = max(_LEAST_TUNING_SWEEPS, half // 16)
        step, _ = tuned_step(state, groups, sweeps, run)
    run(step, half)
    walkers = arrays_of(groups)
    require_sound_walkers(walkers, schedule.n_walkers, f"after equilibration (component {schedule.component + 1})")
    return ChainState(walkers, step, 0)


def next_block(
    state: SampledState, measurement: Measurement, schedule: Schedule, chain: ChainState, stop: threading.Event
) -> tuple[ChainState, BlockRecord]:
    """One more block: the new state to continue from, and what was measured.

    Raises
    ------
    Interrupted
        When ``stop`` was set before the block ended; ``chain`` is still good.
    NumericalError
        If positions or measurements are no numbers; ``chain`` is still good.
    """
    groups = groups_of(state, chain.walkers)

    def run(group: WalkerGroup) -> BlockRecord:
        return measurement.block(
            group, chain.step, schedule.measurements_per_block, schedule.sweeps_between, stop
        )

    record = merged(for_each_group(run, groups, schedule.threads), schedule.n_walkers)
    after = ChainState(arrays_of(groups), chain.step, chain.blocks_done + 1)
    when = f"in block {after.blocks_done} (component {schedule.component + 1})"
    require_sound_walkers(after.walkers, schedule.n_walkers, when)
    require_sound_block(record, when)
    return after, record
