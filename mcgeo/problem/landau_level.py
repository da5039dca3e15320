"""Landau orbits: the form factor through which guiding centres see an interaction."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import eval_laguerre

from mcgeo.geometry.metric import UnimodularMetric

LOWEST = 0


def form_factor_sq(
    wavevectors: NDArray[np.float64], level: int, orbit_metric: UnimodularMetric
) -> NDArray[np.float64]:
    """F_n(q)^2 = L_n(|q|^2/2)^2 exp(-|q|^2/2) with |q|^2 = q.g_L^-1.q, for wavevectors of shape (..., 2).

    Source: R. E. Prange and S. M. Girvin (eds.), The Quantum Hall Effect (Springer, 1990), for the isotropic orbit; an
    anisotropic mass gives the same function of the orbit metric's norm.
    """
    half = 0.5 * orbit_metric.wavevector_norm_sq(wavevectors)
    laguerre = eval_laguerre(level, half) if level else 1.0
    return np.asarray(laguerre**2 * np.exp(-half))
