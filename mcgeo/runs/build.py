"""From a validated configuration to the objects of physics."""

from __future__ import annotations

import math
import os
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from fractions import Fraction
from typing import Any

from mcgeo.errors import GeometryError
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.interaction import INTERACTIONS, Interaction
from mcgeo.problem.mass import mass_metric_from_axes, mass_metric_from_ratio, mass_metric_from_tensor
from mcgeo.problem.problem import Problem
from mcgeo.problem.tilted_field import TiltedField
from mcgeo.sampling.chain import Schedule
from mcgeo.states.base import SampledState, TrialState
from mcgeo.states.droplet import DropletState
from mcgeo.states.registry import DROPLET_STATES, TORUS_STATES
from mcgeo.variational.variation import Variation

Keys = Mapping[str, Any]


@contextmanager
def of_key(key: str) -> Iterator[None]:
    """Errors of geometry raised within are of this key of the configuration, unless they know a better one."""
    try:
        yield
    except GeometryError as fault:
        fault.key = fault.key or key
        raise


def metric_from(keys: Keys) -> UnimodularMetric:
    """Metric of ``stretch`` and ``angle_degrees``."""
    return UnimodularMetric(keys["stretch"], math.radians(keys["angle_degrees"]))


def filling_of(state: Keys) -> Fraction:
    """Filling of the sampled state (not of its conjugate)."""
    return Fraction(1, state["exponent"]) if "exponent" in state else Fraction(state["filling"])


def torus_frame(resolved: Keys) -> TorusFrame:
    """Frame of the lab cell with the state's metric.

    Raises
    ------
    GeometryError
        If the cell cannot be built.
    """
    state, cell = resolved["state"], resolved["cell"]
    n_flux = state["electrons"] / filling_of(state)
    with of_key("cell"):
        if "tau" in cell:
            lab = Cell.from_tau(complex(*cell["tau"]), int(n_flux))
        else:
            lab = Cell.from_shape(cell["shape"], int(n_flux))
        return TorusFrame.of(lab, metric_from(state["metric"]))


def torus_states(resolved: Keys) -> list[TrialState]:
    """The states whose average is the liquid.

    Raises
    ------
    GeometryError
        If the cell does not suit the state.
    """
    state = resolved["state"]
    frame = torus_frame(resolved)
    with of_key("state.points" if state.get("points") else "state.electrons"):
        return TORUS_STATES[state["kind"]](state, frame)


def droplet_state(resolved: Keys) -> DropletState:
    """The droplet of the configuration."""
    state = resolved["state"]
    return DROPLET_STATES[state["kind"]](state, metric_from(state["metric"]))


def interaction_from(keys: Keys) -> Interaction:
    """Interaction of ``kind`` with its parameters: groups made what they mean, degrees made radians."""
    parameters = dict(_parameter(key, value) for key, value in keys.items() if key != "kind")
    return INTERACTIONS[keys["kind"]](**parameters)


def _parameter(key: str, value: Any) -> tuple[str, Any]:
    if key.endswith("_degrees"):
        return key.removesuffix("_degrees"), math.radians(value)
    return key, _GROUPS[key](value) if key in _GROUPS else value


def _terms(terms: Sequence[Keys]) -> tuple[tuple[float, Interaction], ...]:
    return tuple((term["weight"], interaction_from(term["interaction"])) for term in terms)


def _values(values: Mapping[str, float]) -> dict[int, float]:
    return {int(momentum): value for momentum, value in values.items()}


# What the groups of keys of an interaction become, by their name.
_GROUPS: dict[str, Callable[[Any], Any]] = {
    "dielectric": lambda keys: mass_metric_from_ratio(keys["ratio"], math.radians(keys["angle_degrees"])),
    "metric": metric_from,
    "values": _values,
    "terms": _terms,
}


def mass_metric(keys: Keys) -> UnimodularMetric:
    """Mass metric from any of the three ways to write a mass."""
    if "tensor" in keys:
        return mass_metric_from_tensor(keys["tensor"])
    angle = math.radians(keys["angle_degrees"])
    if "along_axes" in keys:
        first, second = keys["along_axes"]
        return mass_metric_from_axes((first, second), angle)
    return mass_metric_from_ratio(keys["ratio"], angle)


def problem_from(keys: Keys, interaction: Interaction | None = None) -> Problem:
    """The projected problem; ``interaction`` where it has been made before."""
    tilt = keys.get("tilt")
    with of_key("problem.mass"):
        mass = mass_metric(keys["mass"])
    with of_key("problem.interaction"):
        found = interaction or interaction_from(keys["interaction"])
    with of_key("problem.tilt"):
        return Problem(mass, found, keys["level"], None if tilt is None else tilted_field(tilt))


def tilted_field(keys: Keys) -> TiltedField:
    """Tilted field and well."""
    return TiltedField(
        math.radians(keys["angle_degrees"]),
        keys["confinement_ratio"],
        math.radians(keys["direction_degrees"]),
        keys["subband"],
        keys["mass_across_ratio"] or 1.0,
        keys["permittivity_across_ratio"] or 1.0,
    )


def variation_from(keys: Keys) -> Variation:
    """Kind of variation of the problem."""
    return Variation(keys["variation"], keys["level_mixing"] or 1.0)


def available_threads() -> int:
    """Cores this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def schedule_from(resolved: Keys, state: SampledState, component: int = 0) -> Schedule:
    """Schedule of the sampling; sweeps are rounded up to whole blocks of whole measurements."""
    keys = resolved["sampling"]
    per_block = -(-keys["sweeps"] // keys["blocks"])
    between = keys["measure_every"] or min(state.sweeps_per_measurement, per_block)
    return Schedule(
        n_walkers=keys["walkers"],
        n_blocks=keys["blocks"],
        measurements_per_block=-(-per_block // between),
        sweeps_between=between,
        equilibration=keys["equilibration"],
        step=keys["step"],
        seed=keys["seed"],
        threads=keys["threads"] or available_threads(),
        component=component,
    )
