"""The energy over the metric of one liquid in one problem, its minimum, and what follows."""

from __future__ import annotations

import dataclasses
import json
import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from mcgeo.errors import ConfigError
from mcgeo.estimate.occupations import PairOccupations
from mcgeo.estimate.statistics import Estimate
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import Coulomb, Interaction
from mcgeo.problem.problem import Problem
from mcgeo.runs.build import interaction_from, problem_from, variation_from
from mcgeo.runs.energy_curve import EnergyCurve, energy_curve
from mcgeo.runs.scannable import Scannable
from mcgeo.runs.table_file import without_contents
from mcgeo.variational.energy_surface import Surface
from mcgeo.variational.minimum import Minimum, find_minimum
from mcgeo.variational.quadrature import LARGEST_DISTANCE
from mcgeo.variational.response import Response, mass_response, shape_verdict
from mcgeo.variational.susceptibility import (
    SurfaceMaker,
    Susceptibility,
    susceptibility,
    with_deformed_interaction,
    with_deformed_mass,
)
from mcgeo.variational.variation import PROJECTED, Variation, orbit_estimates, surface_of


@dataclass(frozen=True, eq=False)
class Optimum:
    """The best metric of one liquid in one problem.

    Attributes
    ----------
    problem : Problem
    variation : Variation
    surface : Surface
    minimum : Minimum
    orbit_stretch, orbit_angle : Estimate
        Of the Landau orbit at the minimum, radians.
    response : Response
    verdict : str
        ``stable``, ``soft`` or ``unstable``; see `mcgeo.variational.response.shape_verdict`.
    """

    problem: Problem
    variation: Variation
    surface: Surface
    minimum: Minimum
    orbit_stretch: Estimate
    orbit_angle: Estimate
    response: Response
    verdict: str


@dataclass(frozen=True, eq=False)
class Scan(Optimum):
    """Everything one scan found: the optimum, its susceptibilities and the energy along a line."""

    susceptibilities: Mapping[str, Susceptibility]
    curve: EnergyCurve


class SharedAnswers:
    """What many problems put to one liquid share, kept between calls of `optimum`: interactions and responses.

    Neither depends on the mass; the results are those without this object, to the last bit.
    """

    def __init__(self) -> None:
        self._interactions: dict[str, Interaction] = {}
        self._responses: dict[str, Response] = {}

    def problem(self, keys: Mapping[str, Any]) -> Problem:
        """The problem, its interaction made once."""
        name = json.dumps(keys["interaction"], sort_keys=True)
        if name not in self._interactions:
            self._interactions[name] = interaction_from(keys["interaction"])
        return problem_from(keys, self._interactions[name])

    def response(self, keys: Mapping[str, Any], surface_for: SurfaceMaker, problem: Problem) -> Response:
        """Response at the isotropic working point of the problem."""
        name = _isotropic_question(keys)
        if name not in self._responses:
            self._responses[name] = mass_response(surface_for, problem)
        return self._responses[name]


def _isotropic_question(keys: Mapping[str, Any]) -> str:
    """The keys that a response depends on: neither mass nor tilt, and level mixing only where the orbit varies."""
    kept = {key: value for key, value in keys.items() if key != "mass"}
    if kept.get("tilt") is not None:
        kept["tilt"] = {k: v for k, v in kept["tilt"].items() if k not in ("angle_degrees", "direction_degrees")}
    if kept["variation"] == PROJECTED:
        kept.pop("level_mixing", None)
    return json.dumps(kept, sort_keys=True)


def optimum(
    liquid: Scannable | PairOccupations, problem_keys: Mapping[str, Any], shared: SharedAnswers | None = None
) -> Optimum:
    """The optimum of a liquid, or of pair occupations by themselves.

    Parameters
    ----------
    liquid : Scannable or PairOccupations
    problem_keys : mapping
        ``problem`` of a resolved configuration.
    shared : SharedAnswers, optional
        Kept by the caller while it puts many problems to this one liquid.

    Raises
    ------
    GeometryError
        If hole and orbit go farther apart than the quadrature resolves.
    ConfigError
        If a droplet has no answer to the problem.
    """
    shared = shared or SharedAnswers()
    problem, variation = shared.problem(problem_keys), variation_from(problem_keys)
    surface_for = _surface_maker(liquid, variation)
    surface = surface_for(problem)
    minimum = find_minimum(surface)
    response = shared.response(problem_keys, surface_for, problem)
    verdict = shape_verdict(problem, minimum, response)
    return Optimum(problem, variation, surface, minimum, *orbit_estimates(surface, minimum), response, verdict)


def _surface_maker(liquid: Scannable | PairOccupations, variation: Variation) -> SurfaceMaker:
    def surface_for(problem: Problem) -> Surface:
        if isinstance(liquid, PairOccupations):
            return surface_of(liquid, problem, variation)
        return liquid.energy_surface(problem, variation)

    return surface_for


def scan(liquid: Scannable, problem_keys: Mapping[str, Any], scan_keys: Mapping[str, Any]) -> Scan:
    """The optimum of a liquid or a droplet, its susceptibilities, and the energy along a line of metrics.

    Raises
    ------
    GeometryError, ConfigError
        As `optimum`.
    """
    found = optimum(liquid, problem_keys)
    problem, minimum = found.problem, found.minimum
    angle = scan_keys["angle_degrees"]
    if angle is not None:
        direction = math.radians(angle)
    else:
        direction = (minimum.metric if minimum.metric.stretch > 0.0 else problem.mass_metric).angle
    span = scan_keys["stretch"]
    stretches = np.linspace(span["from"], span["to"], span["points"])
    return Scan(
        **{field.name: getattr(found, field.name) for field in dataclasses.fields(found)},
        susceptibilities=_susceptibilities(_surface_maker(liquid, found.variation), problem, minimum),
        curve=energy_curve(found.surface, minimum, direction, stretches),
    )


def require_reach(problem: Problem, scan_keys: Mapping[str, Any]) -> None:
    """Refuse, before anything is sampled, metrics farther from the orbit than the quadrature resolves.

    Raises
    ------
    ConfigError
        Naming the keys, with the distance found and the one that works.
    """
    orbit = problem.orbit.metric
    angle = scan_keys["angle_degrees"]
    direction = math.radians(angle) if angle is not None else orbit.angle
    ends = {key: UnimodularMetric(scan_keys["stretch"][key], direction) for key in ("from", "to")}
    # The hole may come to lie anywhere between orbit and interaction.
    places = {
        "problem.mass": ISOTROPIC,
        "problem.interaction": max(problem.interaction.metrics, key=orbit.distance),
        **{f"scan.stretch.{key}": metric for key, metric in ends.items()},
    }
    faults = [
        f"{key}: hole and orbit metric come to be {metric.distance(orbit):.3g} apart (relative aspect ratio "
        f"{math.exp(metric.distance(orbit)):.3g}); at most {LARGEST_DISTANCE:g} works"
        for key, metric in places.items()
        if metric.distance(orbit) > LARGEST_DISTANCE
    ]
    if faults:
        raise ConfigError(faults)


def _susceptibilities(surface_for: SurfaceMaker, problem: Problem, minimum: Minimum) -> dict[str, Susceptibility]:
    """To the mass and, in a field across the plane, to the interaction's shape, for Coulomb the permittivity's.

    None without a minimum.
    """
    if not minimum.interior:
        return {}
    causes = {"mass": with_deformed_mass}
    if problem.tilt is None:
        causes["interaction"] = with_deformed_interaction
    found = {name: susceptibility(surface_for, problem, minimum.metric, cause) for name, cause in causes.items()}
    if isinstance(problem.interaction, Coulomb) and "interaction" in found:
        # Stretching 1/r as a whole is what an anisotropic permittivity does.
        found["dielectric"] = found["interaction"]
    return found


def estimate_pair(name: str, estimate: Estimate) -> dict[str, float]:
    """``name`` and ``name_error``."""
    return {name: estimate.value, f"{name}_error": estimate.error}


def _interaction_name(problem: Problem) -> str:
    if problem.tilt is None:
        return problem.interaction.name
    tilt = problem.tilt
    return f"{problem.interaction.name}, field tilted by {math.degrees(tilt.angle):.3g} degrees, subband {tilt.subband}"


def problem_summary(problem: Problem, keys: Mapping[str, Any]) -> dict[str, Any]:
    """``problem`` of the JSON output: its keys and the mass metric."""
    return {
        **without_contents(keys),
        "interaction_name": _interaction_name(problem),
        "mass_stretch": problem.mass_metric.stretch,
        "mass_angle_degrees": problem.mass_metric.angle_degrees,
        "orbit_aspect_ratio": problem.orbit.metric.aspect_ratio,
    }


def optimum_summary(found: Optimum) -> dict[str, Any]:
    """``optimum`` of the JSON output; the error of an angle without meaning (a circle's) is infinite, null in JSON.

    ``susceptibility`` is among its keys where the optimum is that of a `Scan`.
    """
    m = found.minimum
    susceptibilities = {}
    if isinstance(found, Scan):
        susceptibilities["susceptibility"] = {
            name: {"matrix": value.matrix.tolist(), "error": value.error.tolist()}
            for name, value in found.susceptibilities.items()
        }
    return {
        **estimate_pair("stretch", m.stretch),
        "angle_degrees": math.degrees(m.angle.value),
        "angle_error": math.degrees(m.angle.error),
        **estimate_pair("aspect_ratio", m.aspect_ratio),
        **estimate_pair("energy", m.energy),
        **estimate_pair("gain_isotropic", m.gain_isotropic),
        **estimate_pair("gain_mass", m.gain_mass),
        "stiffness": m.stiffness.tolist(),
        "stiffness_error": m.stiffness_error.tolist(),
        **estimate_pair("stiffness_along", m.stiffness_along),
        **estimate_pair("stiffness_across", m.stiffness_across),
        "isotropic_stiffness": found.response.isotropic_stiffness.value,
        "isotropic_stiffness_error": found.response.isotropic_stiffness.error,
        **estimate_pair("response", found.response.response),
        **susceptibilities,
        **estimate_pair("orbit_stretch", found.orbit_stretch),
        "orbit_angle_degrees": math.degrees(found.orbit_angle.value),
        "orbit_angle_error": math.degrees(found.orbit_angle.error),
        "interior": m.interior,
        "shape_verdict": found.verdict,
    }


def scan_summary(liquid: Scannable, problem_keys: Mapping[str, Any], found: Scan) -> dict[str, Any]:
    """The JSON object of ``scan``."""
    curve = found.curve
    return {
        "state": liquid.state_summary(),
        "problem": problem_summary(found.problem, problem_keys),
        "optimum": optimum_summary(found),
        "curve": [
            {
                "stretch": float(q),
                "angle_degrees": math.degrees(curve.angle),
                "energy": float(e),
                "energy_error": float(error),
                "difference_error": float(difference),
            }
            for q, e, error, difference in zip(
                curve.stretch, curve.energy, curve.error, curve.difference_error, strict=True
            )
        ],
        "diagnostics": liquid.diagnostics_summary(),
    }
