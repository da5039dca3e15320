"""When checkpoints are written, on a clock that the test moves."""

from __future__ import annotations

import time
from pathlib import Path

import pytest

from mcgeo.runs import production
from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.sample import sample
from mcgeo.runs.save_clock import SaveClock

TINY = {
    "state": {"kind": "laughlin", "exponent": 3, "electrons": 3},
    "sampling": {"walkers": 8, "sweeps": 64, "blocks": 16, "equilibration": 4, "seed": 1, "threads": 1, "q_max": 4.0},
}


class Clock:
    """Time as the test says."""

    def __init__(self) -> None:
        self.now = 1000.0

    def __call__(self) -> float:
        return self.now


@pytest.fixture
def clock(monkeypatch: pytest.MonkeyPatch) -> Clock:
    found = Clock()
    monkeypatch.setattr(time, "monotonic", found)
    return found


def test_waits_the_interval_from_the_end_of_the_last_writing(clock: Clock) -> None:
    saves = SaveClock(60.0)
    clock.now += 59.0
    assert not saves.due
    clock.now += 1.0
    assert saves.due
    with saves.writing():
        clock.now += 2.0
    assert not saves.due
    clock.now += 59.0
    assert not saves.due
    clock.now += 1.0
    assert saves.due


def test_slow_writing_takes_a_twentieth_of_the_time(clock: Clock) -> None:
    saves = SaveClock(60.0)
    with saves.writing():
        clock.now += 10.0
    clock.now += 199.0
    assert not saves.due
    clock.now += 1.0
    assert saves.due
    with saves.writing():
        clock.now += 0.1
    clock.now += 60.0
    assert saves.due


def checkpoints(folder: Path, monkeypatch: pytest.MonkeyPatch, seconds: float) -> list[int]:
    """Blocks held by each file that a run of 16 blocks writes; a block takes ten seconds."""
    written: list[int] = []
    write, advance = production.write_result, production.next_block
    clock = Clock()
    monkeypatch.setattr(time, "monotonic", clock)
    # Somebody sets the clock of the machine, forth and back by years.
    jumps = iter(range(10**6))
    monkeypatch.setattr(time, "time", lambda: 1e9 * (-1.0) ** next(jumps))

    def slow_block(*arguments):
        clock.now += 10.0
        return advance(*arguments)

    def note(path, result):
        written.append(result.blocks.drift.shape[1])
        write(path, result)

    monkeypatch.setattr(production, "next_block", slow_block)
    monkeypatch.setattr(production, "write_result", note)
    keys = {**TINY, "sampling": {**TINY["sampling"], "checkpoint_seconds": seconds}}
    found = sample(config_from_resolved(keys), folder, quiet=True)
    assert found.seconds == 160.0
    return written


@pytest.mark.parametrize(
    ("seconds", "blocks"), [(60.0, [6, 12, 16]), (25.0, [3, 6, 9, 12, 15, 16]), (1e6, [16]), (0.0, [*range(1, 17)])]
)
def test_checkpoints_come_at_the_chosen_interval_whatever_the_date_does(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, seconds: float, blocks: list[int]
) -> None:
    assert checkpoints(tmp_path, monkeypatch, seconds) == blocks
