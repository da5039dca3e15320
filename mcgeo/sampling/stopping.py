"""Walkers advanced in pieces so short that a run can be left in between."""

from __future__ import annotations

import threading

from mcgeo.kernels.lanes import LANES
from mcgeo.sampling.blocks import Interrupted
from mcgeo.states.base import SampledState, WalkerGroup

# Estimated time between two looks at whether the run is to stop, in Laughlin pair factors of about a nanosecond.
_PAIR_FACTORS_PER_LOOK = 2e7


def sweeps_per_look(state: SampledState) -> int:
    """Sweeps of one group that take some hundredths of a second; one where a sweep takes longer."""
    n = state.n_electrons
    per_sweep = LANES * n * (n - 1.0) * state.proposals_per_sweep * state.cost_per_pair
    return max(1, int(_PAIR_FACTORS_PER_LOOK / per_sweep))


def advance(group: WalkerGroup, step: float, n_sweeps: int, longest: int, stop: threading.Event) -> None:
    """The sweeps in pieces of at most ``longest``; how they are divided changes nothing.

    Raises
    ------
    Interrupted
        When ``stop`` is set before the last piece.
    """
    for done in range(0, n_sweeps, longest):
        if stop.is_set():
            raise Interrupted
        group.advance(step, min(longest, n_sweeps - done))
