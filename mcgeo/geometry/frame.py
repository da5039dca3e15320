"""A torus seen by a liquid of a given metric: one lattice in the lab and in the isotropic coordinates."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.geometry.cell import Cell, Waves
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric


@dataclass(frozen=True, eq=False)
class TorusFrame:
    """Cell and metric of a trial state; built by `TorusFrame.of`.

    Attributes
    ----------
    lab : Cell
        Basis of the lab's lattice for which the isotropic cell is reduced.
    isotropic : Cell
        The same basis mapped by S, S^T S = g; its tau lies in the fundamental domain.
    metric : UnimodularMetric
        g.
    """

    lab: Cell
    isotropic: Cell
    metric: UnimodularMetric

    @classmethod
    def of(cls, cell: Cell, metric: UnimodularMetric = ISOTROPIC) -> TorusFrame:
        """Frame of a lab cell: map it by S, reduce there, and take the reduced basis back to the lab."""
        isotropic, transformation = cell.mapped(metric.linear_map).reduced()
        return cls(Cell(transformation @ cell.vectors), isotropic, metric)

    def require_tau_below(self, largest: float) -> None:
        """Refuse a cell too long for the kernels.

        Raises
        ------
        GeometryError
            If Im tau of the isotropic cell is above ``largest``.
        """
        imag = self.isotropic.tau.imag
        if imag > largest:
            fault = GeometryError(
                f"the cell is too elongated for this state: its reduced Im(tau) in the state's metric is {imag:.4g}; "
                f"at most {largest:g} works; choose a less extreme cell or metric"
            )
            fault.key = "cell"
            raise fault

    def positions(self, a: NDArray[np.float64], b: NDArray[np.float64]) -> NDArray[np.float64]:
        """Lab positions, shape (..., 2), of fractions a, b of the basis."""
        return np.asarray(np.stack([a, b], axis=-1) @ self.lab.vectors)

    def waves(self, q_max: float) -> Waves:
        """Lab wavevectors of a half-plane with |q|_g < q_max, integers with respect to the basis."""
        return self.lab.waves(q_max, self.metric)
