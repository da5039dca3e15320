"""Energies of a torus straight from S(q): linear in S(q), so weights and a constant say it all.

E = (1/2A) sum_{q != 0} V(q) (S(q) - 1) + xi/2 per electron, xi the Madelung self-energy of the cell. The sum over the
half-plane counts each wave twice. Cutting it sharply would add noise; a soft window erfc(|q|_g - 6)/2 leaves a bias
below 1e-5 because a lowest-level S(q) - 1 falls as exp(-q^2/2).
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray
from scipy.special import erfc

from mcgeo.geometry.frame import TorusFrame
from mcgeo.problem.interaction import Interaction
from mcgeo.problem.landau_level import LOWEST, form_factor_sq
from mcgeo.problem.problem import Problem
from mcgeo.states.base import FERMIONS

Array = NDArray[np.float64]

_WINDOW_MARGIN = 2.0
# Beyond this |q|_g^2 the measured Sbar - 1 = exp(|q|_g^2/2)(S - 1) is noise and its limit is put in its place.
_LIMIT_SQ = 16.0


@dataclass(frozen=True, eq=False)
class LinearEnergy:
    """E = sum_q weights (S(q) - 1) + constant.

    Attributes
    ----------
    weights : ndarray, shape (n_waves,)
    constant : float
    """

    weights: Array
    constant: float

    def of(self, structure: Array) -> Array:
        """Energies per electron of S(q) of shape (..., n_waves)."""
        return np.asarray((structure - 1.0) @ self.weights + self.constant)


def soft_window(norm: Array, q_max: float) -> Array:
    """erfc(|q| - q_max + 2)/2: one for the waves that carry S(q) - 1, falling to zero before the last measured one."""
    return np.asarray(0.5 * erfc(norm - (q_max - _WINDOW_MARGIN)))


def torus_energy(frame: TorusFrame, q_max: float, interaction: Interaction) -> LinearEnergy:
    """Energy of the sampled product state itself: orbit and hole have the state's one metric.

    Parameters
    ----------
    frame : TorusFrame
    q_max : float
        Bound on |q|_g of the measured waves (those of ``frame.waves(q_max)``).
    interaction : Interaction
        In the lab.
    """
    waves = frame.waves(q_max)
    norm = np.sqrt(frame.metric.wavevector_norm_sq(waves.vectors))
    orbit = form_factor_sq(waves.vectors, LOWEST, frame.metric)
    # S - 1 = F^2 (Sbar - 1): of a V(r) this leaves V(q).
    potential = interaction.guiding_centre_potential(waves.vectors, orbit) / orbit
    weights = potential * soft_window(norm, q_max) / frame.lab.area
    return LinearEnergy(weights, 0.5 * interaction.self_energy(frame.lab))


def projected_torus_energy(
    frame: TorusFrame, q_max: float, problem: Problem, filling: Fraction, statistics: str
) -> LinearEnergy:
    """Energy of the guiding-centre state of metric g seen through another orbit.

    (1/2A) sum v(q) [Sbar_g(q) - 1] + xi/2 with v(q) = V(q) F_n(q; g_m)^2 in a thin layer; Sbar_g - 1 =
    exp(|q|_g^2/2) (S_g - 1) where |q|_g^2 < 16 and its limit, -nu for fermions and +nu for bosons, beyond. Images of
    one electron lie in one plane, also where its orbit extends across the layer: xi is that of V.
    """
    waves = frame.waves(q_max)
    norm_sq = frame.metric.wavevector_norm_sq(waves.vectors)
    measured = norm_sq < _LIMIT_SQ
    factor = problem.effective_potential(waves.vectors) / frame.lab.area
    weights = np.where(measured, factor * np.exp(0.5 * np.where(measured, norm_sq, 0.0)), 0.0)
    # All waves out to where v(q) has died away.
    far = frame.lab.waves(problem.reach, problem.orbit.metric)
    beyond = frame.metric.wavevector_norm_sq(far.vectors) >= _LIMIT_SQ
    limit = (-1.0 if statistics == FERMIONS else 1.0) * float(filling)
    tail = limit * np.sum(problem.effective_potential(far.vectors[beyond])) / frame.lab.area
    return LinearEnergy(weights, float(tail) + 0.5 * problem.interaction.self_energy(frame.lab))
