"""Energies of many holes in one problem, roughly: where to start looking for the best of them.

Along a ray of wavevectors q = S_L k u, with S_L the root of the orbit's metric and u a unit vector, the hole enters
through beta = |u|_h^2, h being its metric seen from the orbit's: |q|_g^2 = beta k^2. So

    E(g) - background = <R_u(ln beta(u))>_u,     R_u(t) = int dk k/(4 pi) v(S_L k u) delta(e^t k^2).

The R_u of all rays on one grid of t are one product of matrices, of which one belongs to the liquid alone; after it a
hole costs an interpolation per ray.
"""

from __future__ import annotations

import math
from functools import cache, lru_cache

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.occupations import PairOccupations
from mcgeo.problem.problem import Problem

Array = NDArray[np.float64]

_RAYS = 48
_LARGEST_LOG = 3.8
_LOGS = np.linspace(-_LARGEST_LOG, _LARGEST_LOG, 153)
_INNER_NODES, _OUTER_NODES = 24, 96
_POWER = 4
_REACH_STEP = 3.0
_FINE = 8192
_KEPT = 16


@cache
def _nodes(reach: float) -> tuple[Array, Array]:
    """Nodes and weights on (0, ``reach``): Gauss-Legendre beyond 1, and in k^(1/4) below."""
    x, w = np.polynomial.legendre.leggauss(_INNER_NODES)
    t = 0.5 * (x + 1.0)
    inner, inner_weights = t**_POWER, 0.5 * w * _POWER * t ** (_POWER - 1)
    x, w = np.polynomial.legendre.leggauss(_OUTER_NODES)
    half = 0.5 * (reach - 1.0)
    return np.concatenate([inner, 1.0 + half * (x + 1.0)]), np.concatenate([inner_weights, half * w])


@lru_cache(maxsize=_KEPT)
def _correlations(occupations: PairOccupations, reach: float) -> tuple[Array, Array]:
    """|k|, and k dk/(4 pi) delta(e^t k^2) on the grid of t, shape (n_k, n_t)."""
    k, weights = _nodes(reach)
    fine = np.linspace(0.0, 2.0 * math.sqrt(float(occupations.m[-1])) + 4.0, _FINE)
    delta = occupations.coefficients @ occupations.basis(fine)
    table = np.interp(np.exp(0.5 * _LOGS) * k[:, None], fine, delta, right=0.0)
    return k, table * (weights * k / (4.0 * math.pi))[:, None]


def rough_energies(occupations: PairOccupations, problem: Problem, points: Array) -> Array:
    """Mean energies above the background at flat coordinates about the orbit's metric.

    Parameters
    ----------
    points : ndarray, shape (n, 2)
        At most 3.8 from the origin.

    Returns
    -------
    ndarray, shape (n,)
    """
    k, correlations = _correlations(occupations, _REACH_STEP * math.ceil(problem.reach / _REACH_STEP))
    phi = math.pi * (np.arange(_RAYS) + 0.5) / _RAYS
    directions = problem.orbit.metric.linear_map @ np.stack([np.cos(phi), np.sin(phi)])
    wavevectors = (k[:, None] * directions[:, None, :]).transpose(2, 1, 0)
    table = problem.effective_potential(wavevectors) @ correlations
    stretch, turn = np.hypot(*points.T)[:, None], np.arctan2(points[:, 1], points[:, 0])[:, None]
    # beta = u.h^-1.u
    log_beta = np.log(np.cosh(stretch) - np.sinh(stretch) * np.cos(2.0 * phi - turn))
    place = (log_beta + _LARGEST_LOG) / (_LOGS[1] - _LOGS[0])
    lower = np.minimum(place.astype(int), len(_LOGS) - 2)
    rays = np.arange(_RAYS)
    below, above = table[rays, lower], table[rays, lower + 1]
    return np.asarray((below + (place - lower) * (above - below)).mean(axis=1))
