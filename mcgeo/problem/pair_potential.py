"""What an interaction supplies, and what the potentials V(r) of two electrons have in common.

V(q) is the two-dimensional Fourier transform of V(r), in e^2/(4 pi eps l_B) times l_B^2; V(r) = 1/r has V(q) = 2
pi/q. The uniform background removes q = 0, whatever V(q = 0) is: a self-energy therefore carries -V(q = 0)/A where
that is finite.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.cell import Cell
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.self_energy import windowed_self_energy

Array = NDArray[np.float64]

_DIRECTIONS = 128


class Interaction(Protocol):
    """What an interaction supplies."""

    @property
    def name(self) -> str:
        """Words for reports and figures."""

    @property
    def symmetry(self) -> UnimodularMetric | None:
        """The metric in which V is isotropic, or None where there is none."""

    @property
    def metrics(self) -> tuple[UnimodularMetric, ...]:
        """The metrics that the parts of V follow: a quadrature in the frame of another has to resolve these."""

    def potential(self, wavevectors: Array) -> Array:
        """V(q) for wavevectors of shape (..., 2), none of them zero; an integrable q^-a, a < 2, is allowed."""

    def guiding_centre_potential(self, wavevectors: Array, form_factor_sq: Array) -> Array:
        """v(q), the interaction of guiding centres, given F_n(q)^2 of their orbit at the same wavevectors."""

    def guiding_centre_reach(self, orbit_metric: UnimodularMetric, orbit_reach: float) -> float:
        """Norm |q| in the orbit's metric beyond which v(q) is negligible, given that of F_n(q)^2."""

    def self_energy(self, cell: Cell) -> float:
        """xi = lim_{r -> 0} [(1/A) sum_{q != 0} V(q) e^{iq.r} - V(r)] of the cell."""


class PairPotential(ABC):
    """An interaction V(r) of the electrons' positions: guiding centres see V(q) F_n(q)^2."""

    @property
    @abstractmethod
    def name(self) -> str:
        """Words for reports and figures."""

    @property
    def symmetry(self) -> UnimodularMetric | None:
        """The metric in which V is isotropic, or None where there is none."""
        return None

    @property
    def metrics(self) -> tuple[UnimodularMetric, ...]:
        """The metric of the symmetry; the isotropic one where there is none."""
        return (self.symmetry or ISOTROPIC,)

    @abstractmethod
    def potential(self, wavevectors: Array) -> Array:
        """V(q) for wavevectors of shape (..., 2), none of them zero."""

    def guiding_centre_potential(self, wavevectors: Array, form_factor_sq: Array) -> Array:
        """V(q) F_n(q)^2."""
        return np.asarray(self.potential(wavevectors) * form_factor_sq)

    def guiding_centre_reach(self, orbit_metric: UnimodularMetric, orbit_reach: float) -> float:
        """Where F_n(q)^2 ends."""
        return orbit_reach

    def self_energy(self, cell: Cell) -> float:
        """Sum less integral of V(q) under a soft window."""
        return windowed_self_energy(self.potential, cell, _DIRECTIONS)


class IsotropicPotential(PairPotential):
    """An interaction V(r) that depends on the distance alone."""

    @property
    def symmetry(self) -> UnimodularMetric:
        """The isotropic metric."""
        return ISOTROPIC

    @abstractmethod
    def radial(self, wavenumbers: Array) -> Array:
        """V(q) for q > 0 of any shape."""

    def potential(self, wavevectors: Array) -> Array:
        """V(|q|)."""
        return self.radial(np.hypot(wavevectors[..., 0], wavevectors[..., 1]))

    def self_energy(self, cell: Cell) -> float:
        """Sum less integral of V(q) under a soft window."""
        return windowed_self_energy(self.potential, cell, 1)
