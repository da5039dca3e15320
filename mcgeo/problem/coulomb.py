"""The Coulomb interaction, in an isotropic or an anisotropic dielectric."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.cell import Cell
from mcgeo.geometry.ewald import madelung_self_energy
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.pair_potential import PairPotential

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Coulomb(PairPotential):
    """V(r) = 1/sqrt(r.g_eps.r), V(q) = 2 pi/sqrt(q.g_eps^-1.q).

    A bulk permittivity with the values eps_x, eps_y, eps_z along the axes gives V(q) = e^2/(2 eps_0 sqrt(eps_z (eps_x
    q_x^2 + eps_y q_y^2))): the permittivity of the energy unit is sqrt(eps_z sqrt(eps_x eps_y)), and g_eps =
    diag(sqrt(eps_y/eps_x), sqrt(eps_x/eps_y)), of the ratio e^(2 Q) = eps_y/eps_x along x.

    Parameters
    ----------
    dielectric : UnimodularMetric
        g_eps.
    """

    dielectric: UnimodularMetric = ISOTROPIC

    @property
    def name(self) -> str:
        """Name, with the dielectric where it is anisotropic."""
        if self.dielectric.stretch == 0.0:
            return "Coulomb"
        ratio = math.exp(2.0 * self.dielectric.stretch)
        return f"Coulomb in a dielectric of ratio {ratio:g} at {self.dielectric.angle_degrees:g} degrees"

    @property
    def symmetry(self) -> UnimodularMetric:
        """g_eps."""
        return self.dielectric

    def potential(self, wavevectors: Array) -> Array:
        """2 pi/sqrt(q.g_eps^-1.q)."""
        return np.asarray(2.0 * math.pi / np.sqrt(self.dielectric.wavevector_norm_sq(wavevectors)))

    def self_energy(self, cell: Cell) -> float:
        """Ewald summation."""
        return madelung_self_energy(cell, self.dielectric)
