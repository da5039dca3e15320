"""Interactions given by their energies of relative angular momentum (Haldane, Phys. Rev. Lett. 51, 605 (1983))."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import eval_laguerre

from mcgeo.geometry.cell import Cell
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric

Array = NDArray[np.float64]

# exp(-q^2/2) is below 1e-17 here.
_GAUSSIAN_REACH = 9.0


@dataclass(frozen=True)
class PseudopotentialSum:
    """sum_m v_m P_m: guiding centres of relative angular momentum m in the metric g pay v_m.

    It acts on guiding centres as v(q) = 4 pi sum_m v_m L_m(|q|_g^2) e^(-|q|_g^2/2), whatever orbit they have, so that
    int d^2q/(2 pi)^2 v(q) L_m(|q|_g^2) e^(-|q|_g^2/2) = v_m. Mass and level do not matter.

    Parameters
    ----------
    values : mapping of int to float
        m -> v_m in e^2/(4 pi eps l_B). Fermions feel odd m only, bosons even m; the energy of the uniform density,
        which the background takes away, depends on all.
    metric : UnimodularMetric
        g, in which angular momentum is counted.
    """

    values: Mapping[int, float]
    metric: UnimodularMetric = ISOTROPIC

    @property
    def name(self) -> str:
        """Name with the values."""
        listed = ", ".join(f"V_{m} = {value:g}" for m, value in sorted(self.values.items()))
        if self.metric.stretch == 0.0:
            return f"pseudopotentials {listed}"
        shape = f"stretch {self.metric.stretch:g} at {self.metric.angle_degrees:g} degrees"
        return f"pseudopotentials {listed} of the metric of {shape}"

    @property
    def symmetry(self) -> UnimodularMetric:
        """g."""
        return self.metric

    @property
    def metrics(self) -> tuple[UnimodularMetric, ...]:
        """g."""
        return (self.metric,)

    def potential(self, wavevectors: Array) -> Array:
        """4 pi sum_m v_m L_m(|q|_g^2): the V of electrons in the lowest level whose orbit has the metric g."""
        norm_sq = self.metric.wavevector_norm_sq(wavevectors)
        return np.asarray(4.0 * math.pi * sum(v * eval_laguerre(m, norm_sq) for m, v in self.values.items()))

    def guiding_centre_potential(self, wavevectors: Array, form_factor_sq: Array) -> Array:
        """4 pi sum_m v_m L_m(|q|_g^2) e^(-|q|_g^2/2), of no orbit."""
        return self.potential(wavevectors) * np.exp(-0.5 * self.metric.wavevector_norm_sq(wavevectors))

    def guiding_centre_reach(self, orbit_metric: UnimodularMetric, orbit_reach: float) -> float:
        """Past the turning point 2 sqrt(m) of the last L_m, in the direction that the orbit's norm makes longest."""
        own = 2.0 * math.sqrt(max(self.values)) + _GAUSSIAN_REACH
        return own * math.exp(0.5 * self.metric.distance(orbit_metric))

    def self_energy(self, cell: Cell) -> float:
        """-V(q = 0)/A: V(r) is a derivative of delta(r), and an electron does not meet its images."""
        return -4.0 * math.pi * sum(self.values.values()) / cell.area
