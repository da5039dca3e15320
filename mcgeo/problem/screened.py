"""Coulomb interactions screened by metal gates or by mobile charges in the layer's neighbourhood.

V(q = 0) is finite for all of them.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import exprel

from mcgeo.problem.pair_potential import IsotropicPotential

Array = NDArray[np.float64]


@dataclass(frozen=True)
class OneGate(IsotropicPotential):
    """V(q) = (2 pi/q) (1 - e^(-2qd)): a metal plane at the distance d, V(r) = 1/r - 1/sqrt(r^2 + 4 d^2) by its image.

    Parameters
    ----------
    distance : float
        d in l_B, from the electrons to the gate.
    """

    distance: float

    @property
    def name(self) -> str:
        """Name with the distance."""
        return f"Coulomb with a gate at {self.distance:g} l_B"

    def radial(self, wavenumbers: Array) -> Array:
        """(2 pi/q) (1 - e^(-2qd)); 4 pi d at q = 0."""
        # exprel(x) = (e^x - 1)/x keeps all digits at small x.
        return np.asarray(4.0 * math.pi * self.distance * exprel(-2.0 * self.distance * wavenumbers))


@dataclass(frozen=True)
class TwoGates(IsotropicPotential):
    """V(q) = (2 pi/q) tanh(qd): metal planes at the distance d on either side.

    V(r) = sum_n (-1)^n/sqrt(r^2 + (2nd)^2) over all images falls as exp(-pi r/2d).

    Parameters
    ----------
    distance : float
        d in l_B, from the electrons to either gate.
    """

    distance: float

    @property
    def name(self) -> str:
        """Name with the distance."""
        return f"Coulomb between gates at {self.distance:g} l_B on either side"

    def radial(self, wavenumbers: Array) -> Array:
        """(2 pi/q) tanh(qd); 2 pi d at q = 0."""
        x = self.distance * np.asarray(wavenumbers)
        ratio = np.divide(np.tanh(x), x, out=np.ones_like(x), where=x != 0.0)
        return np.asarray(2.0 * math.pi * self.distance * ratio)


@dataclass(frozen=True)
class Yukawa(IsotropicPotential):
    """V(q) = 2 pi/sqrt(q^2 + k^2), that is V(r) = e^(-kr)/r.

    Parameters
    ----------
    screening : float
        k in 1/l_B; 0 is the Coulomb interaction.
    """

    screening: float

    @property
    def name(self) -> str:
        """Name with the screening wavenumber."""
        return f"Yukawa of screening {self.screening:g}/l_B"

    def radial(self, wavenumbers: Array) -> Array:
        """2 pi/sqrt(q^2 + k^2)."""
        return np.asarray(2.0 * math.pi / np.hypot(wavenumbers, self.screening))
