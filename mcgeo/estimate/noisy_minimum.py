"""The minimum of a smooth curve known at points with independent errors."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtrc

from mcgeo.estimate.statistics import Estimate

Array = NDArray[np.float64]

# A parabola that noise still allows would pull the minimum towards the middle of the range.
_LEAST_DEGREE = 4
_LARGEST_DEGREE = 8
# A polynomial is accepted when its chi-square is not this unlikely.
_LEAST_PROBABILITY = 0.05


@dataclass(frozen=True)
class CurveMinimum:
    """Minimum of a fitted polynomial.

    Attributes
    ----------
    position, value, curvature : Estimate
        Errors by propagation of the fit's covariance.
    gain_at_zero : Estimate
        Value at 0 above the minimum.
    interior : bool
        False when the polynomial has no minimum inside the range; the position is then the lower end of the two.
    degree : int
    probability : float
        That a chi-square as large arises by chance.
    """

    position: Estimate
    value: Estimate
    curvature: Estimate
    gain_at_zero: Estimate
    interior: bool
    degree: int
    probability: float


def fitted_minimum(x: Array, y: Array, error: Array) -> CurveMinimum:
    """Weighted least squares by polynomials from the fourth degree up until chi-square is acceptable; their minimum.

    Parameters
    ----------
    x, y, error : ndarray, shape (n,), n >= 3
        Errors of different points independent.
    """
    # One degree of freedom is left where there are four points or more, so that chi-square can judge the fit.
    largest = min(_LARGEST_DEGREE, len(x) - 1 if len(x) < 4 else len(x) - 2)
    for degree in range(min(_LEAST_DEGREE, largest), largest + 1):
        design = np.vander(x, degree + 1, increasing=True) / error[:, None]
        covariance = np.linalg.inv(design.T @ design)
        c = covariance @ (design.T @ (y / error))
        chi_sq = float(np.sum((y / error - design @ c) ** 2))
        freedom = len(x) - degree - 1
        probability = float(chdtrc(freedom, chi_sq)) if freedom else 1.0
        if probability > _LEAST_PROBABILITY:
            break
    polynomial = np.polynomial.Polynomial(c)
    slope, bend = polynomial.deriv(1), polynomial.deriv(2)
    roots = slope.roots()
    real = roots[np.abs(roots.imag) < 1e-9].real
    inside = [r for r in real if x.min() < r < x.max() and bend(r) > 0.0]
    interior = bool(inside)
    best = min(inside or [float(x[0]), float(x[-1])], key=polynomial)
    powers = np.arange(degree + 1)
    at = best**powers
    d1 = np.array([k * best ** (k - 1) if k else 0.0 for k in powers])
    d2 = np.array([k * (k - 1) * best ** (k - 2) if k > 1 else 0.0 for k in powers])
    d3 = float(polynomial.deriv(3)(best)) if degree > 2 else 0.0
    # dx* = -dP'(x*)/P''(x*); the value does not move to first order, the curvature does.
    move = -d1 / float(bend(best)) if interior else np.zeros(degree + 1)
    origin = np.eye(degree + 1)[0]

    def estimate(value: float, gradient: Array) -> Estimate:
        return Estimate(value, float(np.sqrt(gradient @ covariance @ gradient)))

    return CurveMinimum(
        estimate(best, move),
        estimate(float(polynomial(best)), at),
        estimate(float(bend(best)), d2 + d3 * move),
        estimate(float(polynomial(0.0) - polynomial(best)), origin - at),
        interior,
        degree,
        probability,
    )
