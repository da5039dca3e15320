"""The finite-torus road: the cell stays in the lab, every metric of the scan is sampled on its own.

Energies come straight from S(q) of each sampling; no bulk occupations are fitted. Orbit and hole metric are
independent: `projected` takes the mass's orbit, `rigid` the hole's, `two_metric` the best one for each hole.
"""

from __future__ import annotations

import copy
import math
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

from mcgeo.errors import RunInterrupted
from mcgeo.estimate.finite_size import torus_energy_of_bulk
from mcgeo.estimate.noisy_minimum import CurveMinimum, fitted_minimum
from mcgeo.estimate.statistics import Estimate, mean_estimate
from mcgeo.estimate.torus_energy import projected_torus_energy, torus_energy
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.problem import Problem
from mcgeo.runs.build import problem_from, variation_from
from mcgeo.runs.config import Config, config_from_resolved, resolved
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.progress import say
from mcgeo.runs.sample import sample
from mcgeo.runs.signals import stop_on_signals
from mcgeo.variational.energy_surface import Surface
from mcgeo.variational.variation import PROJECTED, RIGID, Variation, kinetic_energy

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class TorusPoint:
    """One metric: its liquid and its energy in the problem."""

    stretch: float
    metric: UnimodularMetric
    liquid: Liquid
    energy: Estimate


@dataclass(frozen=True, eq=False)
class TorusRoad:
    """All metrics of a scan on the torus, and the minimum of a polynomial through them.

    Attributes
    ----------
    minimum : CurveMinimum
        Along the line of the scan.
    """

    problem: Problem
    angle: float
    points: list[TorusPoint]
    minimum: CurveMinimum


def torus_road(config: Config, folder: Path, *, overwrite: bool = False, quiet: bool = False) -> TorusRoad:
    """Sample every metric of the configured scan on the lab cell and take its energy.

    Each sampling is a result file of its own in ``folder``; those that are there are not run again. Seeds differ from
    metric to metric, so that errors along the curve are independent.
    """
    keys = resolved(config)
    problem, variation = problem_from(keys["problem"]), variation_from(keys["problem"])
    wanted = keys["scan"]["angle_degrees"]
    angle = math.radians(wanted) if wanted is not None else problem.mass_metric.angle
    span = keys["scan"]["stretch"]
    points: list[TorusPoint] = []
    with stop_on_signals() as stop:
        for index, stretch in enumerate(np.linspace(span["from"], span["to"], span["points"])):
            if stop.is_set():
                said = f"{index} of {span['points']} metrics are sampled; the same command goes on from there"
                raise RunInterrupted(f"interrupted: {said}", stop.signal_number)
            metric = UnimodularMetric(float(stretch), angle)
            if not quiet:
                say(f"metric {index + 1} of {span['points']}: stretch {stretch:.4g}")
            place = folder / f"metric_{index:03d}"
            liquid = sample(_at_metric(keys, metric, index), place, overwrite=overwrite, quiet=True, stop=stop)
            assert isinstance(liquid, Liquid)
            points.append(TorusPoint(float(stretch), metric, liquid, torus_point_energy(liquid, problem, variation)))
    x, y, error = (
        np.array(values)
        for values in zip(*((p.stretch, p.energy.value, p.energy.error) for p in points), strict=True)
    )
    return TorusRoad(problem, angle, points, fitted_minimum(x, y, error))


def _at_metric(keys: Mapping[str, Any], metric: UnimodularMetric, index: int) -> Config:
    changed = copy.deepcopy(dict(keys))
    changed["state"]["metric"] = {"stretch": metric.stretch, "angle_degrees": metric.angle_degrees}
    if changed["sampling"]["seed"] is not None:
        changed["sampling"]["seed"] += index
    return config_from_resolved(changed)


def torus_point_energy(liquid: Liquid, problem: Problem, variation: Variation) -> Estimate:
    """Energy per electron of a sampled metric in a problem, kinetic energy included where the orbit varies."""
    structure = liquid.structure_samples
    metric = liquid.frame.metric
    if variation.kind == PROJECTED:
        return mean_estimate(_projected(liquid, problem, structure))
    if variation.kind == RIGID:
        kinetic = kinetic_energy(problem, metric, variation.level_mixing)
        if problem.level == 0 and problem.tilt is None:
            return mean_estimate(torus_energy(liquid.frame, liquid.q_max, problem.interaction).of(structure) + kinetic)
        return mean_estimate(_projected(liquid, problem.with_mass(metric), structure) + kinetic)
    mean = structure.mean(axis=0)[None, :]

    def energy(point: Array) -> float:
        orbit = problem.mass_metric.displaced(*point)
        kinetic = kinetic_energy(problem, orbit, variation.level_mixing)
        return float(_projected(liquid, problem.with_mass(orbit), mean)[0]) + kinetic

    best = problem.mass_metric.displaced(*minimize(energy, (0.0, 0.0), method="Nelder-Mead").x)
    kinetic = kinetic_energy(problem, best, variation.level_mixing)
    return mean_estimate(_projected(liquid, problem.with_mass(best), structure) + kinetic)


def _projected(liquid: Liquid, problem: Problem, structure: Array) -> Array:
    found = liquid.occupations
    energy = projected_torus_energy(liquid.frame, liquid.q_max, problem, found.filling, found.statistics)
    return energy.of(structure)


@dataclass(frozen=True)
class Comparison:
    """One metric on both roads.

    Attributes
    ----------
    stretch : float
    torus, plane : Estimate
    finite_size : float
        What the finite-size law says the torus should be above the plane.
    deviation : float
        (torus - plane - finite_size) in standard errors.
    """

    stretch: float
    torus: Estimate
    plane: Estimate
    finite_size: float
    deviation: float


def compare_roads(road: TorusRoad, liquid: Liquid, surface: Surface) -> list[Comparison]:
    """The two roads side by side for a projected problem; ``liquid`` gave ``surface`` and the bulk structure."""
    rows = []
    for point in road.points:
        samples = surface.sample_energies(point.metric)
        plane = mean_estimate(samples)
        law = torus_energy_of_bulk(liquid.occupations, point.liquid.frame, road.problem) - plane.value
        error = math.hypot(point.energy.error, plane.error)
        rows.append(
            Comparison(
                point.stretch, point.energy, plane, law, (point.energy.value - plane.value - law) / error
            )
        )
    return rows
