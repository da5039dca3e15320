"""An interaction stretched as a whole: V'(r) = V(S r) with S^T S = g, so that circles of V become ellipses r.g.r."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.cell import Cell
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.pair_potential import Interaction

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Deformed:
    """``base`` deformed by an area-preserving map.

    Parameters
    ----------
    base : Interaction
    metric : UnimodularMetric
        g.
    """

    base: Interaction
    metric: UnimodularMetric

    @property
    def name(self) -> str:
        """Name of the base with the stretch."""
        return f"{self.base.name}, stretched by {self.metric.stretch:.3g} at {self.metric.angle_degrees:.3g} degrees"

    @property
    def symmetry(self) -> UnimodularMetric | None:
        """The base's metric seen through S."""
        return None if self.base.symmetry is None else self.metric.composed_with(self.base.symmetry)

    @property
    def metrics(self) -> tuple[UnimodularMetric, ...]:
        """The base's metrics seen through S."""
        return tuple(self.metric.composed_with(metric) for metric in self.base.metrics)

    def potential(self, wavevectors: Array) -> Array:
        """V'(q) = V(S^-1 q)."""
        return self.base.potential(wavevectors @ self.metric.inverse_linear_map)

    def guiding_centre_potential(self, wavevectors: Array, form_factor_sq: Array) -> Array:
        """The base's at S^-1 q, with the form factor of the orbit as it is."""
        return self.base.guiding_centre_potential(wavevectors @ self.metric.inverse_linear_map, form_factor_sq)

    def guiding_centre_reach(self, orbit_metric: UnimodularMetric, orbit_reach: float) -> float:
        """The base's, for the orbit as it looks in the undeformed frame."""
        return self.base.guiding_centre_reach(orbit_metric.relative_to(self.metric), orbit_reach)

    def self_energy(self, cell: Cell) -> float:
        """Self-energy of the base on the mapped lattice."""
        return self.base.self_energy(cell.mapped(self.metric.linear_map))
