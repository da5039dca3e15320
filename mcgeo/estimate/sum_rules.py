"""What every run must find whatever its length: rules that are exact, in standard errors of what was found."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.special import j1

from mcgeo.estimate.occupations import occupation_fit, rule_matrix, sum_rules
from mcgeo.geometry.frame import TorusFrame
from mcgeo.states.base import TrialState

Array = NDArray[np.float64]

RULES = ("neutrality", "screening", "compressibility")


def sum_rule_z(state: TrialState, norm: Array, samples: Array) -> dict[str, float]:
    """Sum rules of the pair occupations fitted to S(q) without them, in standard deviations.

    A c - b over the root of A C A^T, C = (X^T W^2 X + P^2)^-1 the covariance of the fit with its penalty read as a
    prior: waves of a finite cell start at some q, and what the rules say of q = 0 is partly the prior's. Deviations
    are therefore smaller than those of a normal deviate. A compressible liquid (no shift) has none: its S(q) goes on
    with a power |q|^3 that a finite cell does not resolve. They are the infinite liquid's: in a cell of a few l_B the
    pairs of opposite sides see one another, and large deviations say that such a liquid is not what was sampled.

    Parameters
    ----------
    state : TrialState
    norm : ndarray, shape (n_waves,)
        |q| in the state's metric.
    samples : ndarray, shape (n_samples, n_waves)
        Independent samples of S(q).
    """
    if state.shift is None:
        return {}
    fit = occupation_fit(state, norm, samples)
    order, values = sum_rules(state.filling, state.statistics, state.shift)
    rules = rule_matrix(order, fit.m)
    free = fit.m >= state.first_occupied
    weighted = fit.basis[:, free] * fit.weight[:, None]
    normal = weighted.T @ weighted + np.diag(fit.penalty[free] ** 2)
    # Scaling by the diagonal keeps the system well conditioned: the normal matrix spans many decades.
    scale = 1.0 / np.sqrt(np.diag(normal))
    covariance = np.linalg.inv(normal * scale[:, None] * scale) * scale[:, None] * scale
    target = fit.data.mean(axis=0) - fit.offset + fit.basis[:, ~free].sum(axis=1)
    c = covariance @ (weighted.T @ (target * fit.weight))
    deviation = rules[:, free] @ c - rules[:, ~free].sum(axis=1) - values
    spread = np.sqrt(np.einsum("ra,ab,rb->r", rules[:, free], covariance, rules[:, free]))
    return dict(zip(RULES, (deviation / spread).tolist(), strict=True))


def pairs_within(frame: TorusFrame, norm: Array, structure: Array, n_electrons: int, radius: float) -> Array:
    """Mean number of pairs closer (in the metric) than ``radius``, from S(q) of shape (..., n_waves).

    N (N-1) pi R^2/(2 A) + (N/2A) sum_{q != 0} (S(q) - 1) 2 pi R J_1(qR)/q, exact while no lattice vector is shorter
    than 2R.
    """
    area = frame.lab.area
    weights = n_electrons / area * 2.0 * math.pi * radius * j1(norm * radius) / norm
    uniform = n_electrons * (n_electrons - 1) * math.pi * radius**2 / (2.0 * area)
    return np.asarray(uniform + (structure - 1.0) @ weights)
