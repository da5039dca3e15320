"""What a configuration will do and about what it will cost, before anything runs."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from mcgeo.kernels.lanes import LANES
from mcgeo.runs.build import droplet_state, problem_from, schedule_from, torus_frame
from mcgeo.runs.catalogue import KIND
from mcgeo.runs.catalogue_summary import catalogue_plan
from mcgeo.runs.ending import Ending, ending_of
from mcgeo.runs.experiment import experiment_of
from mcgeo.runs.scan import require_reach

# Seconds per pair factor, per wave and electron, and per pair measured in a droplet, of one core, on a processor
# with 512-bit registers at 2.3 GHz; an estimate within a factor of two elsewhere.
_SECONDS_PER_PAIR = 1.0e-9
_SECONDS_PER_WAVE_AND_ELECTRON = 0.25e-9
_SECONDS_PER_MEASURED_PAIR = 1.7e-9
# Seconds of one optimum with its response, and what a tilted field makes of them.
_SECONDS_PER_OPTIMUM = {"projected": 0.005, "rigid": 0.2, "two_metric": 0.35}
_TILTED_COST = 4.0
# Points of the curve that cost as much as the optimum.
_CURVE_POINTS_PER_OPTIMUM = 20.0
# Numbers per block and walker beside the waves and the trace: histograms.
_KEPT_BESIDE_WAVES = 200


def plan_of(resolved: Mapping[str, Any]) -> dict[str, Any]:
    """The plan: sizes, shapes, and estimates of time and disk, the scan's time included.

    Raises
    ------
    GeometryError
        If the cell does not suit the state.
    ConfigError
        If the scan reaches too far from the mass.
    """
    problem = problem_from(resolved["problem"])
    require_reach(problem, resolved["scan"])
    found = sampling_plan(resolved)
    core_seconds, points = found.pop("core_seconds"), resolved["scan"]["stretch"]["points"]
    cores = min(found["threads"], -(-found["walkers"] // LANES)) if core_seconds else 1
    if resolved["scan"]["road"] == "torus":
        # Every metric of the scan is sampled by itself.
        core_seconds, scanning = points * core_seconds, 0.0
        found["estimated_megabytes"] = round(points * found["estimated_megabytes"], 2)
    else:
        scanning = optimum_seconds(resolved["problem"]) * (1.0 + points / _CURVE_POINTS_PER_OPTIMUM)
    return {
        **found,
        "interaction": problem.interaction.name,
        "level": problem.level,
        "mass_stretch": problem.mass_metric.stretch,
        "scan_points": points,
        "estimated_sampling_seconds": round(core_seconds / cores, 1),
        "estimated_scan_seconds": round(scanning, 1),
        "estimated_seconds": round(core_seconds / cores + scanning, 1),
    }


def optimum_seconds(problem: Mapping[str, Any]) -> float:
    """About what the optimum of one problem takes, of one core."""
    tilted = 1.0 if problem["tilt"] is None else _TILTED_COST
    return _SECONDS_PER_OPTIMUM[problem["variation"]] * tilted


def sampling_plan(resolved: Mapping[str, Any]) -> dict[str, Any]:
    """What of the plan belongs to the sampling; ``core_seconds`` is its time on one core.

    Raises
    ------
    GeometryError
        If the cell does not suit the state.
    """
    if resolved["state"]["kind"] == KIND:
        return catalogue_plan(resolved)
    experiment = experiment_of(resolved)
    state = experiment.states[0]
    schedule = schedule_from(resolved, state)
    n, n_components = state.n_electrons, len(experiment.states)
    surface, n_waves, seconds_per_measurement = _surface(resolved)
    ending = ending_of(resolved["sampling"], schedule)
    production = ending.most_blocks * schedule.sweeps_per_block
    sweeps = production + 2 * schedule.equilibration
    per_walker = sweeps * n * (n - 1.0) * state.proposals_per_sweep * state.cost_per_pair * _SECONDS_PER_PAIR
    per_walker += sweeps / schedule.sweeps_between * seconds_per_measurement
    kept = n_waves + _KEPT_BESIDE_WAVES + n_components * schedule.measurements_per_block
    return {
        "state": state.label,
        "components": n_components,
        "electrons": n,
        **surface,
        "walkers": schedule.n_walkers,
        "sweeps_per_walker": production,
        "blocks": ending.most_blocks,
        **_open_end(ending),
        "sweeps_between_measurements": schedule.sweeps_between,
        "threads": schedule.threads,
        "core_seconds": per_walker * schedule.n_walkers * n_components,
        "estimated_megabytes": round(ending.most_blocks * schedule.n_walkers * kept * 8e-6, 2),
    }


def _open_end(ending: Ending) -> dict[str, Any]:
    """What a run with a target says of its length; sweeps, blocks, time and disk are then those of the limit."""
    if ending.target is None:
        return {}
    target = ending.target
    words = f"open, until the error of the {target.quantity} is {target.error:g}, at least {ending.first_blocks} blocks"
    return {"length": f"{words}; sweeps, blocks, time and disk stated here are those of the limit"}


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
