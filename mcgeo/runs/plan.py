"""What a configuration will do and about what it will cost, before anything runs."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from mcgeo.runs.build import problem_from, schedule_from, torus_frame, torus_states

# Seconds per pair factor and per wave and electron of one core, measured on a processor with 512-bit registers at
# 2.3 GHz; an estimate within a factor of two elsewhere.
_SECONDS_PER_PAIR = 0.9e-9
_SECONDS_PER_WAVE_AND_ELECTRON = 0.25e-9


def plan_of(resolved: Mapping[str, Any]) -> dict[str, Any]:
    """The plan: sizes, shapes, and estimates of time and disk.

    Raises
    ------
    GeometryError
        If the cell does not suit the state.
    """
    states = torus_states(resolved)
    state, frame = states[0], torus_frame(resolved)
    schedule = schedule_from(resolved, state)
    n_waves = len(frame.waves(resolved["sampling"]["q_max"]).integers)
    n = state.n_electrons
    problem = problem_from(resolved["problem"])
    sweeps = schedule.sweeps_per_walker + 2 * schedule.equilibration
    pairs = n * (n - 1.0) * state.proposals_per_sweep * state.cost_per_pair
    per_walker = sweeps * pairs * _SECONDS_PER_PAIR
    per_walker += sweeps / schedule.sweeps_between * n * n_waves * _SECONDS_PER_WAVE_AND_ELECTRON
    cores = min(schedule.threads, -(-schedule.n_walkers // 8))
    numbers = schedule.n_blocks * schedule.n_walkers
    tau = frame.isotropic.tau
    return {
        "state": state.label,
        "components": len(states),
        "electrons": n,
        "flux_quanta": frame.lab.n_flux,
        "cell": f"side {frame.lab.side:.5g} l_B, tau {tau.real:.5g} {tau.imag:+.5g}i in the state's metric",
        "walkers": schedule.n_walkers,
        "sweeps_per_walker": schedule.sweeps_per_walker,
        "blocks": schedule.n_blocks,
        "sweeps_between_measurements": schedule.sweeps_between,
        "wavevectors": n_waves,
        "interaction": problem.interaction.name,
        "level": problem.level,
        "mass_stretch": problem.mass_metric.stretch,
        "scan_points": resolved["scan"]["stretch"]["points"],
        "threads": schedule.threads,
        "estimated_seconds": round(per_walker * schedule.n_walkers * len(states) / cores, 1),
        "estimated_megabytes": round(numbers * (n_waves + 200 + schedule.measurements_per_block) * 8e-6, 2),
    }
