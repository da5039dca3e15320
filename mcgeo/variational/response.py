"""How far the hole follows a weak anisotropy of the mass, and what that says of the isotropic shape.

For weak anisotropy E = K Q^2/2 - C Q Q_m cos(2 theta - 2 theta_m) + ..., so Q* = (C/K) Q_m: the response dQ*/dQ_m at
zero is C/K. K is the stiffness of the isotropic hole in the isotropic problem. K <= 0 says that the isotropic hole is
no minimum.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.statistics import Estimate, jackknife_error, jackknife_means
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.problem import Problem
from mcgeo.variational.energy_surface import Surface
from mcgeo.variational.minimum import Minimum

STABLE, SOFT, UNSTABLE = "stable", "soft", "unstable"

_MASS_STEP = 0.04


@dataclass(frozen=True)
class Response:
    """Linear response of the hole to the mass.

    Attributes
    ----------
    response : Estimate
        dQ*/dQ_m at Q_m -> 0.
    isotropic_stiffness : Estimate
        K in e^2/(4 pi eps l_B) per electron.
    """

    response: Estimate
    isotropic_stiffness: Estimate


def mass_response(surface_for: Callable[[Problem], Surface], problem: Problem) -> Response:
    """Response at the isotropic working point of the problem's interaction and level, the field across the plane.

    Parameters
    ----------
    surface_for : callable
        Energy surface of the same liquid and kind of variation in another problem.
    """

    problem = problem.untilted()

    def gradient(stretch: float) -> NDArray[np.float64]:
        return surface_for(problem.with_mass(UnimodularMetric(stretch))).expansion_about(ISOTROPIC).gradient[:, 0]

    # Odd differences of two steps, combined so that their cubic errors cancel.
    near = (gradient(_MASS_STEP) - gradient(-_MASS_STEP)) / (2.0 * _MASS_STEP)
    far = (gradient(2.0 * _MASS_STEP) - gradient(-2.0 * _MASS_STEP)) / (4.0 * _MASS_STEP)
    coupling = -(4.0 * near - far) / 3.0
    isotropic = surface_for(problem.with_mass(ISOTROPIC)).expansion_about(ISOTROPIC)
    stiffness = isotropic.hessian[:, 0, 0]
    replicas = jackknife_means(np.stack([coupling, stiffness], axis=-1))
    return Response(
        Estimate(
            float(coupling.mean() / stiffness.mean()), float(jackknife_error(replicas[:, 0] / replicas[:, 1])),
            math.nan, float(len(coupling)),
        ),
        Estimate(float(stiffness.mean()), float(jackknife_error(replicas[:, 1])), math.nan, float(len(coupling))),
    )  # fmt: skip


def shape_verdict(problem: Problem, minimum: Minimum, response: Response) -> str:
    """`stable`, `soft` or `unstable`.

    ``unstable``: no interior minimum, or the isotropic hole is no minimum of the isotropic problem (its stiffness is
    not positive, or a symmetric problem has its minimum elsewhere). ``soft``: a response above one, the hole
    exaggerates the mass.
    """
    elsewhere = problem.is_symmetric and minimum.metric.stretch > 0.0
    # With an anisotropic interaction the isotropic hole is not even stationary, and its curvature says nothing.
    symmetry = problem.interaction.symmetry
    no_minimum = symmetry is not None and symmetry.stretch == 0.0 and response.isotropic_stiffness.value <= 0.0
    if not minimum.interior or elsewhere or no_minimum:
        return UNSTABLE
    return SOFT if response.response.value > 1.0 else STABLE
