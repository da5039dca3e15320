"""Effective masses: three ways to write one tensor, and the metric it defines.

With masses m1, m2 along axes turned by an angle, the mass ratio is m1/m2 = e^(2 Q_m) and the mass metric
g_m = m_ab/sqrt(det m) has stretch Q_m along the first axis (the heavy one, when the ratio is above 1).
"""

from __future__ import annotations

import math

from numpy.typing import ArrayLike

from mcgeo.errors import GeometryError
from mcgeo.geometry.metric import UnimodularMetric


def mass_metric_from_ratio(ratio: float, angle: float = 0.0) -> UnimodularMetric:
    """Mass metric of the ratio m1/m2 > 0 with axis 1 at ``angle`` (radians).

    Raises
    ------
    GeometryError
        If the ratio is not positive and finite.
    """
    if not (ratio > 0.0 and math.isfinite(ratio)):
        raise GeometryError(f"a mass ratio must be positive and finite, not {ratio}")
    return UnimodularMetric(0.5 * math.log(ratio), angle)


def mass_metric_from_axes(masses: tuple[float, float], angle: float = 0.0) -> UnimodularMetric:
    """Mass metric of the masses along two perpendicular axes, the first at ``angle`` (radians).

    Raises
    ------
    GeometryError
        If a mass is not positive.
    """
    if not (masses[0] > 0.0 and masses[1] > 0.0):
        raise GeometryError(f"masses must be positive, not {masses}")
    return mass_metric_from_ratio(masses[0] / masses[1], angle)


def mass_metric_from_tensor(tensor: ArrayLike) -> UnimodularMetric:
    """Mass metric of a symmetric positive 2x2 tensor.

    Raises
    ------
    GeometryError
        If the tensor is not symmetric and positive definite.
    """
    return UnimodularMetric.from_mass_tensor(tensor)
