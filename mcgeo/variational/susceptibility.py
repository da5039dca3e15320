"""How the optimal hole moves when what it depends on is deformed a little more, at any working point.

With x the flat coordinates of the hole about its optimum and p those of the mass metric (or of the interaction's shape)
about their present values, E(x, p) = E_0 + x.H.x/2 + x.C.p + ..., so the optimum moves by x* = -H^-1 C p. The
susceptibility -H^-1 C is a 2x2 matrix in the directions (Q cos 2 theta, Q sin 2 theta) of the lab. In an isotropic
problem it is the response times the unit matrix; a turn of everything together gives a sum rule at every working
point (see the tests).
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.statistics import jackknife_error, jackknife_means
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.deformed import Deformed
from mcgeo.problem.problem import Problem
from mcgeo.variational.energy_surface import Surface

Array = NDArray[np.float64]

_STEP = 0.04

SurfaceMaker = Callable[[Problem], Surface]


@dataclass(frozen=True, eq=False)
class Susceptibility:
    """dx*/dp with its error, both of shape (2, 2): row the hole's coordinate, column that of the cause."""

    matrix: Array
    error: Array


def with_deformed_mass(problem: Problem, step: Array) -> Problem:
    """The problem with its mass metric displaced by flat coordinates of shape (2,)."""
    return problem.with_mass(problem.mass_metric.displaced(*step))


def with_deformed_interaction(problem: Problem, step: Array) -> Problem:
    """The problem with its interaction stretched by the metric at flat coordinates of shape (2,)."""
    metric = UnimodularMetric.from_flat_coordinates(*step)
    return dataclasses.replace(problem, interaction=Deformed(problem.interaction, metric))


def susceptibility(
    surface_for: SurfaceMaker, problem: Problem, hole: UnimodularMetric, cause: Callable[[Problem, Array], Problem]
) -> Susceptibility:
    """Susceptibility of an optimal hole to one cause.

    Parameters
    ----------
    surface_for : callable
        Energy surface of the same liquid and kind of variation in another problem.
    hole : UnimodularMetric
        The optimum of ``problem``.
    cause : callable
        `with_deformed_mass` or `with_deformed_interaction`.
    """

    def gradient(step: Array) -> Array:
        return surface_for(cause(problem, step)).expansion_about(hole).gradient

    def slope(direction: Array) -> Array:
        near = (gradient(_STEP * direction) - gradient(-_STEP * direction)) / (2.0 * _STEP)
        far = (gradient(2.0 * _STEP * direction) - gradient(-2.0 * _STEP * direction)) / (4.0 * _STEP)
        return np.asarray((4.0 * near - far) / 3.0)

    coupling = np.stack([slope(direction) for direction in np.eye(2)], axis=-1)
    hessian = surface_for(problem).expansion_about(hole).hessian
    replicas = -np.linalg.solve(jackknife_means(hessian), jackknife_means(coupling))
    return Susceptibility(-np.linalg.solve(hessian.mean(axis=0), coupling.mean(axis=0)), jackknife_error(replicas))
