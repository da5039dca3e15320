"""Dipoles of one direction in a layer of Gaussian density."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import erfcx

from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.pair_potential import PairPotential

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Dipole(PairPotential):
    """Parallel dipoles, D (1 - 3 cos^2)/r^3 in space, with the density exp(-z^2/2s^2)/sqrt(2 pi s^2) across the layer.

    In space the interaction is 4 pi D [(n.Q)^2/Q^2 - 1/3], n the dipoles' direction and without a contact term at r =
    0. Averaged over q_z with the layer's exp(-q_z^2 s^2), with the tilt T of n from the normal and the angle phi of q
    from the direction to which n leans,

        V(q) = 4 pi D {(cos^2 T - 1/3)/(2 sqrt(pi) s) + (q/2) e^(q^2 s^2) erfc(qs) (sin^2 T cos^2 phi - cos^2 T)}.

    V(q = 0) is finite. At r >> s it is V(r) = D (1 - 3 sin^2 T cos^2 phi)/r^3, for s -> 0 at fixed q the second term is
    2 pi D q (sin^2 T cos^2 phi - cos^2 T) and the first, a contact interaction, grows as 1/s. Fermions do not feel
    a contact interaction. At T = 90 degrees dipoles in a row attract each other.

    Parameters
    ----------
    thickness : float
        s in l_B, the standard deviation of the density.
    tilt : float
        T in radians.
    direction : float
        Angle in the plane to which the dipoles lean, in radians.
    strength : float
        D in e^2 l_B^2/(4 pi eps): for the moment e times a length, that length over l_B squared.
    """

    thickness: float
    tilt: float = 0.0
    direction: float = 0.0
    strength: float = 1.0

    @property
    def name(self) -> str:
        """Name with thickness and tilt."""
        words = f"dipoles in a layer of {self.thickness:g} l_B"
        if self.strength != 1.0:
            words += f", strength {self.strength:g}"
        if self.symmetry is not None:
            return words
        tilt, direction = math.degrees(self.tilt), math.degrees(self.direction)
        return f"{words}, tilted by {tilt:g} towards {direction:g} degrees"

    @property
    def symmetry(self) -> UnimodularMetric | None:
        """Isotropic without a tilt."""
        return ISOTROPIC if math.sin(self.tilt) == 0.0 else None

    def potential(self, wavevectors: Array) -> Array:
        """V(q)."""
        length = np.hypot(wavevectors[..., 0], wavevectors[..., 1])
        along = math.cos(self.direction) * wavevectors[..., 0] + math.sin(self.direction) * wavevectors[..., 1]
        cos_sq, sin_sq = math.cos(self.tilt) ** 2, math.sin(self.tilt) ** 2
        contact = (cos_sq - 1.0 / 3.0) / (2.0 * math.sqrt(math.pi) * self.thickness)
        angular = sin_sq * along**2 / length - cos_sq * length
        long_ranged = 0.5 * angular * erfcx(self.thickness * length)
        return np.asarray(4.0 * math.pi * self.strength * (contact + long_ranged))
