"""Runs can be left between two short pieces of work, in every phase, and the pieces change nothing."""

from __future__ import annotations

import threading
from dataclasses import replace

import numpy as np
import pytest

from mcgeo.runs.build import schedule_from
from mcgeo.runs.config import config_from_resolved, resolved
from mcgeo.runs.experiment import Experiment, experiment_of
from mcgeo.sampling import chain as chains
from mcgeo.sampling.blocks import Interrupted
from mcgeo.sampling.chain import ChainState, equilibrated, next_block
from mcgeo.sampling.stopping import advance, sweeps_per_look
from mcgeo.sampling.walkers import groups_of, start_walkers

STATES = {
    "laughlin": {"kind": "laughlin", "exponent": 3, "electrons": 5},
    "moore_read": {"kind": "moore_read", "filling": "1/2", "electrons": 6, "sector": 1},
    "fermi_sea": {"kind": "fermi_sea", "filling": "1/2", "electrons": 7},
    "droplet": {"kind": "laughlin", "exponent": 3, "electrons": 5},
    "pfaffian_droplet": {"kind": "moore_read", "filling": "1/2", "electrons": 6},
}
GIANTS = [
    {"kind": "laughlin", "exponent": 3, "electrons": 400},
    {"kind": "moore_read", "filling": "1/2", "electrons": 100, "sector": 1},
    {"kind": "fermi_sea", "filling": "1/2", "electrons": 37},
]


def keys_of(name: str) -> dict:
    sampling = {"walkers": 8, "sweeps": 64, "blocks": 2, "equilibration": 32, "seed": 9, "threads": 1, "q_max": 4.0}
    geometry = {"kind": "disk" if "droplet" in name else "torus"}
    return resolved(config_from_resolved({"state": STATES[name], "geometry": geometry, "sampling": sampling}))


def experiment(name: str) -> Experiment:
    return experiment_of(keys_of(name))


class StopAt(threading.Event):
    """Set from the n-th look on."""

    def __init__(self, n: int) -> None:
        super().__init__()
        self.looks, self._n = 0, n

    def is_set(self) -> bool:
        self.looks += 1
        return self.looks > self._n


@pytest.mark.parametrize("name", STATES)
def test_pieces_change_no_bit(name: str) -> None:
    state = experiment(name).states[0]
    one, pieces = (groups_of(state, start_walkers(state, 8, seed=3))[0] for _ in range(2))
    one.advance(state.first_step, 70)
    advance(pieces, state.first_step, 70, 9, threading.Event())
    for array in ("a", "b", "words", "accepted"):
        np.testing.assert_array_equal(getattr(pieces, array), getattr(one, array))
    pieces.advance(state.first_step, 1)
    assert np.any(pieces.a != one.a)


@pytest.mark.parametrize("keys", GIANTS, ids=lambda keys: keys["kind"])
def test_pieces_are_short_for_large_states(keys: dict) -> None:
    state = experiment_of(resolved(config_from_resolved({"state": keys, "sampling": {"q_max": 4.0}}))).states[0]
    n = state.n_electrons
    per_sweep = 8 * n * (n - 1) * state.proposals_per_sweep * state.cost_per_pair
    # A pair factor takes about a nanosecond.
    assert sweeps_per_look(state) * per_sweep <= max(2e7, per_sweep)


@pytest.mark.parametrize("name", STATES)
def test_every_look_can_end_the_run(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """Equilibration, each round of tuning and each measurement look at the flag, whichever look it is set at."""
    monkeypatch.setattr(chains, "sweeps_per_look", lambda state: 4)
    keys, plan = keys_of(name), experiment(name)
    state, measurement = plan.states[0], plan.measurements[0]
    schedule = replace(schedule_from(keys, state), measurements_per_block=3)
    never = StopAt(10**9)
    start = equilibrated(state, schedule, never)
    # Twice 16 sweeps, and 16 rounds of 8.
    assert never.looks == 2 * 4 + 16 * 2
    for n in range(never.looks):
        with pytest.raises(Interrupted):
            equilibrated(state, schedule, StopAt(n))

    never = StopAt(10**9)
    whole, _ = next_block(state, measurement, schedule, start, never)
    assert never.looks == 3
    for n in range(never.looks):
        before = ChainState(replace(start.walkers), start.step, 0)
        with pytest.raises(Interrupted):
            next_block(state, measurement, schedule, before, StopAt(n))
        # What was interrupted has left no trace in the walkers.
        again, _ = next_block(state, measurement, schedule, before, threading.Event())
        np.testing.assert_array_equal(again.walkers.a, whole.walkers.a)
        np.testing.assert_array_equal(again.walkers.words, whole.walkers.words)
