"""Moves per second and time per pair factor of every sampled state, one table.

Times are processor seconds of one thread, the median of several runs of the same chain.
"""

from __future__ import annotations

import argparse
import json
import statistics
import time
from typing import Any

from mcgeo.runs.build import torus_states
from mcgeo.runs.config import config_from_resolved, resolved
from mcgeo.sampling.tuning import tuned_step
from mcgeo.sampling.walkers import groups_of, start_walkers

_STATES: list[tuple[dict[str, Any], tuple[int, ...]]] = [
    ({"kind": "laughlin", "exponent": 3}, (20, 50, 100, 200, 400)),
]
_RUNS = 5
_SECONDS_PER_RUN = 0.5


def measured(keys: dict[str, Any]) -> dict[str, Any]:
    """One row: a group of eight walkers of the state."""
    state = torus_states(resolved(config_from_resolved({"state": keys})))[0]
    groups = groups_of(state, start_walkers(state, 8, seed=1))
    groups[0].advance(state.first_step, 30)
    step, acceptance = tuned_step(state, groups, 10, threads=1)
    moves_per_sweep = 8 * state.n_electrons * state.proposals_per_sweep
    started = time.thread_time()
    groups[0].advance(step, 4)
    n_sweeps = max(1, int(4 * _SECONDS_PER_RUN / max(time.thread_time() - started, 1e-6)))
    rates = []
    for _ in range(_RUNS):
        started = time.thread_time()
        groups[0].advance(step, n_sweeps)
        rates.append(n_sweeps * moves_per_sweep / (time.thread_time() - started))
    rate = statistics.median(rates)
    return {
        "state": state.label,
        "geometry": "torus",
        "electrons": state.n_electrons,
        "acceptance": acceptance,
        "moves_per_second": rate,
        "ns_per_pair": 1e9 / rate / (state.n_electrons - 1),
    }


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--json", action="store_true", help="one JSON object instead of the table")
    arguments = parser.parse_args()
    rows = [measured({**keys, "electrons": n}) for keys, sizes in _STATES for n in sizes]
    if arguments.json:
        print(json.dumps({"rows": rows}, indent=2))
        return
    print(f"{'state':24} {'electrons':>9} {'acceptance':>10} {'moves/s':>10} {'ns/pair':>8}")
    for row in rows:
        print(
            f"{row['state']:24} {row['electrons']:9d} {row['acceptance']:10.3f} "
            f"{row['moves_per_second']:10.3g} {row['ns_per_pair']:8.3f}"
        )


if __name__ == "__main__":
    main()
