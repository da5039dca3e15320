"""The step is tuned in its own phase and then frozen: a chain that still adapts has no fixed distribution."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

from mcgeo.kernels.lanes import LANES
from mcgeo.states.base import SampledState, WalkerGroup

_ROUNDS = 16
_GAIN = 2.0


def tuned_step(
    state: SampledState, groups: Sequence[WalkerGroup], sweeps_per_round: int, run: Callable[[float, int], None]
) -> tuple[float, float]:
    """Side of the square proposal at which the state's best acceptance is met, and the acceptance of the last round.

    The logarithm of the step follows the excess of acceptance with a gain that falls from round to round (Robbins and
    Monro, Ann. Math. Stat. 22, 400 (1951)). The step never
    exceeds the state's largest one. ``run`` advances all groups with a step by a number of sweeps.
    """
    largest = state.largest_step
    step = min(state.first_step, largest)
    acceptance = 0.0
    for turn in range(_ROUNDS):
        before = sum(float(group.accepted.sum()) for group in groups)
        run(step, sweeps_per_round)
        proposals = len(groups) * LANES * state.n_electrons * state.proposals_per_sweep * sweeps_per_round
        acceptance = (sum(float(group.accepted.sum()) for group in groups) - before) / proposals
        gain = _GAIN / math.sqrt(1.0 + turn)
        step = min(largest, step * math.exp(gain * (acceptance - state.best_acceptance)))
    return step, acceptance
