"""The energy over the metric of one liquid in one problem, its minimum, and what follows."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import ConfigError
from mcgeo.estimate.statistics import Estimate, jackknife_error, jackknife_means
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.problem import Problem
from mcgeo.runs.build import problem_from, variation_from
from mcgeo.runs.droplet import Droplet
from mcgeo.runs.droplet_scan import droplet_surface
from mcgeo.runs.droplet_summary import droplet_state_summary
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.run_summary import diagnostics_summary
from mcgeo.runs.sample_summary import liquid_state_summary
from mcgeo.runs.table_file import without_contents
from mcgeo.variational.energy_surface import LARGEST_DISTANCE, Surface
from mcgeo.variational.minimum import Minimum, find_minimum
from mcgeo.variational.response import Response, mass_response, shape_verdict
from mcgeo.variational.susceptibility import (
    SurfaceMaker,
    Susceptibility,
    susceptibility,
    with_deformed_interaction,
    with_deformed_mass,
)
from mcgeo.variational.variation import Variation, orbit_estimates, surface_of

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class EnergyCurve:
    """E along one direction of the metric.

    Attributes
    ----------
    stretch : ndarray, shape (n,)
        Signed Q along ``angle``: negative means the same |Q| turned by a right angle.
    angle : float
        theta in radians.
    energy, error : ndarray, shape (n,)
    difference_error : ndarray, shape (n,)
        Error of E(Q) - E(Q*): the errors along the curve are strongly correlated.
    """

    stretch: Array
    angle: float
    energy: Array
    error: Array
    difference_error: Array


@dataclass(frozen=True, eq=False)
class Scan:
    """Everything one scan found."""

    problem: Problem
    variation: Variation
    minimum: Minimum
    orbit_stretch: Estimate
    orbit_angle: Estimate
    response: Response
    susceptibilities: Mapping[str, Susceptibility]
    verdict: str
    surface: Surface
    curve: EnergyCurve


def scan(liquid: Liquid | Droplet, problem_keys: Mapping[str, Any], scan_keys: Mapping[str, Any]) -> Scan:
    """Scan of a liquid or a droplet.

    Raises
    ------
    GeometryError
        If the range of stretches goes farther from the mass metric than the quadrature resolves.
    ConfigError
        If a droplet has no answer to the problem.
    """
    problem = problem_from(problem_keys)
    variation = variation_from(problem_keys)

    def surface_for(other: Problem) -> Surface:
        if isinstance(liquid, Droplet):
            return droplet_surface(liquid, other, variation)
        return surface_of(liquid.occupations, other, variation)

    surface = surface_for(problem)
    minimum = find_minimum(surface)
    response = mass_response(surface_for, problem)
    angle = scan_keys["angle_degrees"]
    if angle is not None:
        direction = math.radians(angle)
    else:
        direction = (minimum.metric if minimum.metric.stretch > 0.0 else problem.mass_metric).angle
    span = scan_keys["stretch"]
    stretches = np.linspace(span["from"], span["to"], span["points"])
    return Scan(
        problem,
        variation,
        minimum,
        *orbit_estimates(surface, minimum),
        response,
        _susceptibilities(surface_for, problem, minimum),
        shape_verdict(problem, minimum, response),
        surface,
        _curve(surface, minimum, direction, stretches),
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
    places = {"problem.mass": ISOTROPIC, **{f"scan.stretch.{key}": metric for key, metric in ends.items()}}
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


def _curve(surface: Surface, minimum: Minimum, angle: float, stretches: Array) -> EnergyCurve:
    at_minimum = surface.sample_energies(minimum.metric)
    samples = np.stack([surface.sample_energies(UnimodularMetric(q, angle)) for q in stretches], axis=-1)
    return EnergyCurve(
        stretches,
        angle,
        samples.mean(axis=0),
        jackknife_error(jackknife_means(samples)),
        jackknife_error(jackknife_means(samples - at_minimum[:, None])),
    )


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


def optimum_summary(found: Scan) -> dict[str, Any]:
    """``optimum`` of the JSON output; the error of an angle without meaning (a circle's) is infinite, null in JSON."""
    m = found.minimum
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
        "susceptibility": {
            name: {"matrix": value.matrix.tolist(), "error": value.error.tolist()}
            for name, value in found.susceptibilities.items()
        },
        **estimate_pair("orbit_stretch", found.orbit_stretch),
        "orbit_angle_degrees": math.degrees(found.orbit_angle.value),
        "orbit_angle_error": math.degrees(found.orbit_angle.error),
        "interior": m.interior,
        "shape_verdict": found.verdict,
    }


def scan_summary(liquid: Liquid | Droplet, problem_keys: Mapping[str, Any], found: Scan) -> dict[str, Any]:
    """The JSON object of ``scan``."""
    curve = found.curve
    return {
        "state": droplet_state_summary(liquid) if isinstance(liquid, Droplet) else liquid_state_summary(liquid),
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
        "diagnostics": diagnostics_summary(liquid),
    }
