"""An interaction with a shape of its own, which the package does not have."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.cell import Cell
from mcgeo.geometry.ewald import madelung_self_energy
from mcgeo.geometry.metric import UnimodularMetric


@dataclass(frozen=True)
class StretchedCoulomb:
    """V(r) = 1/sqrt(r.g.r), V(q) = 2 pi/sqrt(q.g^-1.q): Coulomb interaction in an anisotropic dielectric."""

    symmetry: UnimodularMetric
    name: str = "stretched Coulomb"

    def potential(self, wavevectors: NDArray[np.float64]) -> NDArray[np.float64]:
        """2 pi/sqrt(q.g^-1.q) for wavevectors of shape (..., 2)."""
        return 2.0 * math.pi / np.sqrt(self.symmetry.wavevector_norm_sq(wavevectors))

    def self_energy(self, cell: Cell) -> float:
        """Self-energy of the cell."""
        return madelung_self_energy(cell, self.symmetry)
