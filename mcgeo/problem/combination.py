"""Weighted sums of interactions."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.cell import Cell
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.pair_potential import Interaction

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Combination:
    """sum_i w_i V_i.

    Parameters
    ----------
    terms : tuple of (float, Interaction)
        Weights, of either sign, and interactions; one term at least.
    """

    terms: tuple[tuple[float, Interaction], ...]

    @property
    def name(self) -> str:
        """The terms with their weights."""
        return " + ".join(f"{weight:g} x ({term.name})" for weight, term in self.terms)

    @property
    def symmetry(self) -> UnimodularMetric | None:
        """The metric that all terms share, or None."""
        found = {term.symmetry for _, term in self.terms}
        return found.pop() if len(found) == 1 else None

    @property
    def metrics(self) -> tuple[UnimodularMetric, ...]:
        """Those of all terms."""
        return tuple(dict.fromkeys(metric for _, term in self.terms for metric in term.metrics))

    def potential(self, wavevectors: Array) -> Array:
        """sum_i w_i V_i(q)."""
        return np.asarray(sum(weight * term.potential(wavevectors) for weight, term in self.terms))

    def guiding_centre_potential(self, wavevectors: Array, form_factor_sq: Array) -> Array:
        """Each term as it acts on guiding centres."""
        return np.asarray(
            sum(weight * term.guiding_centre_potential(wavevectors, form_factor_sq) for weight, term in self.terms)
        )

    def guiding_centre_reach(self, orbit_metric: UnimodularMetric, orbit_reach: float) -> float:
        """That of the term that reaches farthest."""
        return max(term.guiding_centre_reach(orbit_metric, orbit_reach) for _, term in self.terms)

    def self_energy(self, cell: Cell) -> float:
        """sum_i w_i xi_i."""
        return sum(weight * term.self_energy(cell) for weight, term in self.terms)
