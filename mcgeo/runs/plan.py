"""What a configuration will do and about what it will cost, before anything runs."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from mcgeo.kernels.lanes import LANES
from mcgeo.runs.build import droplet_state, problem_from, schedule_from, torus_frame
from mcgeo.runs.experiment import experiment_of
from mcgeo.runs.scan import require_reach

# Seconds per pair factor, per wave and electron, and per pair measured in a droplet, of one core, on a processor
# with 512-bit registers at 2.3 GHz; an estimate within a factor of two elsewhere.
_SECONDS_PER_PAIR = 1.0e-9
_SECONDS_PER_WAVE_AND_ELECTRON = 0.25e-9
_SECONDS_PER_MEASURED_PAIR = 1.7e-9
# Numbers per block and walker beside the waves and the trace: histograms.
_KEPT_BESIDE_WAVES = 200


def plan_of(resolved: Mapping[str, Any]) -> dict[str, Any]:
    """The plan: sizes, shapes, and estimates of time and disk.

    Raises
    ------
    GeometryError
        If the cell does not suit the state.
    """
    experiment = experiment_of(resolved)
    state = experiment.states[0]
    schedule = schedule_from(resolved, state)
    n, n_components = state.n_electrons, len(experiment.states)
    surface, n_waves, seconds_per_measurement = _surface(resolved)
    problem = problem_from(resolved["problem"])
    require_reach(problem, resolved["scan"])
    sweeps = schedule.sweeps_per_walker + 2 * schedule.equilibration
    per_walker = sweeps * n * (n - 1.0) * state.proposals_per_sweep * state.cost_per_pair * _SECONDS_PER_PAIR
    per_walker += sweeps / schedule.sweeps_between * seconds_per_measurement
    cores = min(schedule.threads, -(-schedule.n_walkers // LANES))
    kept = n_waves + _KEPT_BESIDE_WAVES + n_components * schedule.measurements_per_block
    return {
        "state": state.label,
        "components": n_components,
        "electrons": n,
        **surface,
        "walkers": schedule.n_walkers,
        "sweeps_per_walker": schedule.sweeps_per_walker,
        "blocks": schedule.n_blocks,
        "sweeps_between_measurements": schedule.sweeps_between,
        "interaction": problem.interaction.name,
        "level": problem.level,
        "mass_stretch": problem.mass_metric.stretch,
        "scan_points": resolved["scan"]["stretch"]["points"],
        "threads": schedule.threads,
        "estimated_seconds": round(per_walker * schedule.n_walkers * n_components / cores, 1),
        "estimated_megabytes": round(schedule.n_blocks * schedule.n_walkers * kept * 8e-6, 2),
    }


def _surface(resolved: Mapping[str, Any]) -> tuple[dict[str, Any], int, float]:
    """Where the electrons live, the number of waves measured, and the seconds that a measurement takes."""
    n = resolved["state"]["electrons"]
    if resolved["geometry"]["kind"] == "disk":
        words = f"{droplet_state(resolved).background.radius:.5g} l_B in the state's metric"
        return {"droplet_radius": words}, 0, 0.5 * n * (n - 1.0) * _SECONDS_PER_MEASURED_PAIR
    frame = torus_frame(resolved)
    tau = frame.isotropic.tau
    n_waves = len(frame.waves(resolved["sampling"]["q_max"]).integers)
    words = f"side {frame.isotropic.side:.5g} l_B, tau {tau.real:.5g} {tau.imag:+.5g}i in the state's metric"
    found = {"flux_quanta": frame.lab.n_flux, "cell": words, "wavevectors": n_waves}
    return found, n_waves, n * n_waves * _SECONDS_PER_WAVE_AND_ELECTRON
