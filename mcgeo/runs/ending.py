"""When a run ends: after its blocks, or when a statistical error is small enough.

A run with a target is looked at when it has ``blocks`` blocks, then each time that it has grown by a tenth. These
counts and the blocks so far decide, and nothing else: an interrupted run ends where it would have ended.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from mcgeo.estimate.diagnostics import LEAST_SAMPLES
from mcgeo.sampling.chain import Schedule

if TYPE_CHECKING:
    from mcgeo.runs.sampled import Sampled

_GROWTH = 10


@dataclass(frozen=True)
class Target:
    """What shall be known how well.

    Attributes
    ----------
    quantity : str
        ``energy`` or ``stretch``.
    error : float
    """

    quantity: str
    error: float


@dataclass(frozen=True)
class Ending:
    """When a run ends.

    Attributes
    ----------
    first_blocks, most_blocks : int
        Fewest and most blocks; equal without a target.
    target : Target or None
    """

    first_blocks: int
    most_blocks: int
    target: Target | None

    def _looks(self) -> Iterator[int]:
        count = self.first_blocks
        while count < self.most_blocks:
            yield count
            count -= -count // _GROWTH
        yield self.most_blocks

    def look_after(self, n_blocks: int) -> int:
        """The next count of blocks at which the run is looked at."""
        return next((count for count in self._looks() if count > n_blocks), n_blocks)

    def is_look(self, n_blocks: int) -> bool:
        """True at the counts of blocks at which the run is looked at."""
        return n_blocks in self._looks()

    def satisfied_by(self, result: Sampled) -> bool:
        """True when no more blocks are wanted."""
        if result.n_blocks < self.first_blocks:
            return False
        return result.n_blocks >= self.most_blocks or (self.target is not None and is_reached(result, self.target))

    def expected_blocks(self, n_blocks: int, error: float) -> int:
        """Blocks that the whole run will take, judged from an error so far: its square falls as their number grows."""
        if self.target is None or not math.isfinite(error):
            return self.most_blocks
        wanted = math.ceil(n_blocks * (error / self.target.error) ** 2)
        return max(n_blocks, min(self.most_blocks, wanted))


def target_from(sampling: Mapping[str, Any]) -> Target | None:
    """Target of the ``sampling`` keys."""
    error = sampling["target_error"]
    return None if error is None else Target(sampling["target_quantity"], error)


def ending_of(sampling: Mapping[str, Any], schedule: Schedule) -> Ending:
    """Ending of the ``sampling`` keys."""
    target, first = target_from(sampling), schedule.n_blocks
    most = first if target is None else max(first, sampling["most_sweeps"] // schedule.sweeps_per_block)
    return Ending(first, most, target)


def is_reached(result: Sampled, target: Target) -> bool:
    """True when the error is small enough, and rests on enough independent samples to be trusted."""
    return result.statistical_error(target.quantity) <= target.error and result.effective_samples >= LEAST_SAMPLES


def target_summary(result: Sampled) -> dict[str, Any] | None:
    """``diagnostics.target`` of the JSON output; None for a run without a target."""
    target = target_from(result.resolved["sampling"])
    if target is None:
        return None
    error = result.statistical_error(target.quantity)
    sweeps = result.n_blocks * result.schedule.sweeps_per_block
    return {
        "quantity": target.quantity,
        "wanted": target.error,
        "error": error,
        "reached": is_reached(result, target),
        "sweeps": sweeps,
        "sweeps_needed": sweeps * max(1.0, (error / target.error) ** 2) if math.isfinite(error) else None,
    }


def missed_target(result: Sampled) -> tuple[str, float] | None:
    """What a finished run with a target says when its error came out too large, and by what factor it ought to grow."""
    found = target_summary(result)
    if found is None or not result.complete or found["error"] <= found["wanted"]:
        return None
    if found["sweeps_needed"] is None:
        return "there is no optimum whose stretch could be known", 1.0
    reason = f"error of the {found['quantity']} {found['error']:.2g} after {found['sweeps']:g} sweeps, wanted "
    needed = f"{found['wanted']:.2g}, for which about {found['sweeps_needed']:.2g} sweeps would do"
    return reason + needed, found["sweeps_needed"] / found["sweeps"]


def blocks_of(result: Sampled) -> str:
    """How far a run has come: ``3 of 8 blocks``."""
    most = ending_of(result.resolved["sampling"], result.schedule).most_blocks
    return f"{result.n_blocks} of {most} blocks"
