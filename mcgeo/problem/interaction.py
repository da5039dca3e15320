"""Pair interactions as functions of the wavevector.

V(q) is the two-dimensional Fourier transform of V(r), in e^2/(4 pi eps l_B) times l_B^2; V(r) = 1/r has V(q) = 2
pi/q. The uniform background removes q = 0. To add an interaction: one class with the three members below, one line in
`INTERACTIONS`, one model in the configuration.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.cell import Cell, lattice_points
from mcgeo.geometry.ewald import madelung_self_energy
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric

Array = NDArray[np.float64]


class Interaction(Protocol):
    """What an interaction supplies."""

    @property
    def name(self) -> str:
        """Words for reports and figures."""

    @property
    def symmetry(self) -> UnimodularMetric | None:
        """The metric in which V is isotropic, or None where there is none."""

    def potential(self, wavevectors: Array) -> Array:
        """V(q) for wavevectors of shape (..., 2), none of them zero; an integrable 1/q at small q is allowed."""

    def self_energy(self, cell: Cell) -> float:
        """xi = lim_{r -> 0} [(1/A) sum_{q != 0} V(q) e^{iq.r} - V(r)] of the cell."""


@dataclass(frozen=True)
class Coulomb:
    """V(r) = 1/r, V(q) = 2 pi/q."""

    name: str = "Coulomb"
    symmetry: UnimodularMetric = ISOTROPIC

    def potential(self, wavevectors: Array) -> Array:
        """2 pi/|q|."""
        return 2.0 * math.pi / np.hypot(wavevectors[..., 0], wavevectors[..., 1])

    def self_energy(self, cell: Cell) -> float:
        """Ewald summation."""
        return madelung_self_energy(cell)


@dataclass(frozen=True)
class Gaussian:
    """V(q) = 2 pi exp(-q^2 s^2/2), that is V(r) = exp(-r^2/2 s^2)/s^2.

    Parameters
    ----------
    range : float
        s in l_B.
    """

    range: float
    symmetry: UnimodularMetric = ISOTROPIC

    @property
    def name(self) -> str:
        """Name with the range."""
        return f"Gaussian of range {self.range:g} l_B"

    def potential(self, wavevectors: Array) -> Array:
        """2 pi exp(-q^2 s^2/2)."""
        norm_sq = wavevectors[..., 0] ** 2 + wavevectors[..., 1] ** 2
        return 2.0 * math.pi * np.exp(-0.5 * self.range**2 * norm_sq)

    def self_energy(self, cell: Cell) -> float:
        """sum_{R != 0} V(R) - V(q=0)/A; by the dual sum minus V(r=0) where that converges faster."""
        lattice, _ = cell.reduced()
        if self.range**2 < cell.area / (2.0 * math.pi):
            points = lattice_points(lattice.vectors, 9.0 * self.range)
            total = np.sum(np.exp(-0.5 * np.sum(points**2, axis=-1) / self.range**2)) / self.range**2
            return float(total - 2.0 * math.pi / cell.area)
        waves = lattice_points(np.asarray(2.0 * math.pi * np.linalg.inv(lattice.vectors).T), 9.0 / self.range)
        return float(np.sum(self.potential(waves)) / cell.area - 1.0 / self.range**2)


INTERACTIONS = {"coulomb": Coulomb, "gaussian": Gaussian}
