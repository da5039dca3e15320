"""A short-ranged interaction with closed forms for nearly everything."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.cell import Cell, lattice_points
from mcgeo.problem.pair_potential import IsotropicPotential

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Gaussian(IsotropicPotential):
    """V(q) = 2 pi exp(-q^2 s^2/2), that is V(r) = exp(-r^2/2 s^2)/s^2.

    Parameters
    ----------
    range : float
        s in l_B.
    """

    range: float

    @property
    def name(self) -> str:
        """Name with the range."""
        return f"Gaussian of range {self.range:g} l_B"

    def radial(self, wavenumbers: Array) -> Array:
        """2 pi exp(-q^2 s^2/2)."""
        return np.asarray(2.0 * math.pi * np.exp(-0.5 * (self.range * wavenumbers) ** 2))

    def self_energy(self, cell: Cell) -> float:
        """sum_{R != 0} V(R) - V(q=0)/A; by the dual sum minus V(r=0) where that converges faster."""
        lattice, _ = cell.reduced()
        if self.range**2 < cell.area / (2.0 * math.pi):
            points = lattice_points(lattice.vectors, 9.0 * self.range)
            total = np.sum(np.exp(-0.5 * np.sum(points**2, axis=-1) / self.range**2)) / self.range**2
            return float(total - 2.0 * math.pi / cell.area)
        waves = lattice_points(np.asarray(2.0 * math.pi * np.linalg.inv(lattice.vectors).T), 9.0 / self.range)
        return float(np.sum(self.potential(waves)) / cell.area - 1.0 / self.range**2)
