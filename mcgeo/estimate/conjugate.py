"""Hole conjugates: the liquid of filling 1 - nu whose holes form the liquid of filling nu (fermions).

Filling up the level turns rho_q of the electrons into minus that of the holes at q != 0, so <rho_q rho_-q> is common
to both: nu Sbar(q), per flux quantum, is the same for electrons and holes. With r = nu/(1 - nu), Sbar - 1 =
exp(q^2/2) (S - 1) and the expansion in pair occupations this gives

    S_c - 1 = r (S - 1) + (r - 1) exp(-q^2/2),       c_m -> r^2 c_m,

and, with E(1) the energy of the filled level, (1 - nu) E(1 - nu) = nu E(nu) + (1 - 2 nu) E(1) per flux quantum
(Girvin, Phys. Rev. B 29, 6012 (1984)). What depends on the hole's metric differs by a positive factor only: the
optimal metric is the same.
"""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.occupations import PairOccupations

Array = NDArray[np.float64]


def _ratio(filling: Fraction) -> float:
    return float(filling / (1 - filling))


def conjugate_structure(filling: Fraction, norm: Array, samples: Array) -> Array:
    """S(q) of the conjugate of a fermion liquid.

    Parameters
    ----------
    filling : Fraction
        nu of the sampled liquid.
    norm : ndarray, shape (n_waves,)
        |q| in its metric.
    samples : ndarray, shape (..., n_waves)
        S(q) of the sampled liquid.
    """
    r = _ratio(filling)
    return np.asarray(1.0 + r * (samples - 1.0) + (r - 1.0) * np.exp(-0.5 * norm**2))


def conjugate_occupations(occupations: PairOccupations) -> PairOccupations:
    """Pair occupations of the conjugate of a fermion liquid."""
    r = _ratio(occupations.filling)
    return PairOccupations(
        f"hole conjugate of {occupations.label}",
        1 - occupations.filling,
        occupations.statistics,
        occupations.m,
        r**2 * occupations.samples,
        None if occupations.free_errors is None else r**2 * occupations.free_errors,
    )
