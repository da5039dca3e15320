"""What a configuration samples and measures, by geometry."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from mcgeo.estimate.torus_energy import torus_energy
from mcgeo.problem.interaction import Coulomb
from mcgeo.runs.build import droplet_state, torus_frame, torus_states
from mcgeo.runs.droplet import Droplet
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.sampled import Sampled
from mcgeo.sampling.blocks import Measurement
from mcgeo.sampling.droplet_measurement import DropletMeasurement
from mcgeo.sampling.measurement import torus_measurement
from mcgeo.states.base import SampledState


@dataclass(frozen=True, eq=False)
class Experiment:
    """States, one per component, and what is measured on each.

    Attributes
    ----------
    states : sequence of SampledState
    measurements : sequence of Measurement
    trace_offset : float
        To be added to the trace to make it an energy.
    result : type
        Class of the result file's contents.
    """

    states: Sequence[SampledState]
    measurements: Sequence[Measurement]
    trace_offset: float
    result: type[Sampled]


def _torus(resolved: Mapping[str, Any]) -> Experiment:
    frame, states = torus_frame(resolved), torus_states(resolved)
    q_max = resolved["sampling"]["q_max"]
    energy = torus_energy(frame, q_max, Coulomb())
    waves = frame.waves(q_max)
    # The trace is sum_q w S(q); the energy has S - 1 and the cell's constant.
    offset = energy.constant - float(energy.weights.sum())
    return Experiment(states, [torus_measurement(state, waves, energy.weights) for state in states], offset, Liquid)


def _disk(resolved: Mapping[str, Any]) -> Experiment:
    state = droplet_state(resolved)
    return Experiment([state], [DropletMeasurement(state)], 0.0, Droplet)


_EXPERIMENTS = {"torus": _torus, "disk": _disk}
_RESULTS: dict[str, type[Sampled]] = {"torus": Liquid, "disk": Droplet}


def experiment_of(resolved: Mapping[str, Any]) -> Experiment:
    """The experiment of a resolved configuration.

    Raises
    ------
    GeometryError
        If cell, metric and state do not suit each other.
    """
    return _EXPERIMENTS[resolved["geometry"]["kind"]](resolved)


def result_class(resolved: Mapping[str, Any]) -> type[Sampled]:
    """Class of the result file's contents."""
    return _RESULTS[resolved["geometry"]["kind"]]
