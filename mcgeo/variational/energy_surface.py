"""Energy per electron over the metric of the hole.

    E(g) = 1/2 int d^2q/(2 pi)^2 v(q) [Sbar(|q|_g) - 1],   v(q) = V(q) F_n(q; g_L)^2,
    Sbar(k) - 1 = e nu + 4 nu sum_m c_m L_m(k^2) exp(-k^2/2).

The constant e nu gives a background that does not depend on g. For the rest put q = S k with S^T S = g, so that |q|_g
= |k|: the correlations are then functions of |k| on one fixed radial grid, and a metric enters only through the
weights

    A(k) = k/(8 pi^2) int_0^{2 pi} dphi v(S k(phi)),
    E = background + int dk A(k) delta(k),       delta = Sbar - 1 - e nu.

One set of weights gives the energy of every block sample.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.estimate.occupations import PairOccupations
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.problem import Problem

Array = NDArray[np.float64]

_RADIAL_NODES = 200
# exp(-p^2/2) of the orbit is below 1e-17 here; delta(k) of L_m ends beyond its turning point 2 sqrt(m).
_ORBIT_RANGE = 9.0
_BEYOND_TURNING_POINT = 4.0
_LARGEST_DISTANCE = 4.0


def _radial_rule(largest: float, n_nodes: int) -> tuple[Array, Array]:
    nodes, weights = np.polynomial.legendre.leggauss(n_nodes)
    return 0.5 * largest * (nodes + 1.0), 0.5 * largest * weights


def _n_angles(distance: float) -> int:
    """Equidistant angles on half a turn that resolve exp(-k^2 ...) between two metrics ``distance`` apart."""
    return 16 * math.ceil(3.0 * math.exp(0.75 * distance))


def angular_mean(problem: Problem, metric: UnimodularMetric, radii: Array) -> Array:
    """(1/2 pi) int dphi v(S k(phi)) at |k| of shape (n,), shape (n,); the trapezoidal rule on half a turn.

    Raises
    ------
    GeometryError
        If metric and orbit are farther apart than 4 (relative aspect ratio 55).
    """
    distance = metric.distance(problem.mass_metric)
    if distance > _LARGEST_DISTANCE:
        raise GeometryError(
            f"hole and orbit metric are {distance:.3g} apart (relative aspect ratio {math.exp(distance):.3g}); "
            f"at most {_LARGEST_DISTANCE:g} works"
        )
    phi = math.pi * (np.arange(_n_angles(distance)) + 0.5) / _n_angles(distance)
    directions = np.stack([np.cos(phi), np.sin(phi)], axis=-1) @ metric.linear_map.T
    return np.asarray(problem.effective_potential(radii[:, None, None] * directions).mean(axis=1))


@dataclass(frozen=True, eq=False)
class EnergySurface:
    """E(g) of one liquid in one problem, with its samples.

    Parameters
    ----------
    occupations : PairOccupations
    problem : Problem
    """

    occupations: PairOccupations
    problem: Problem
    _radii: Array = field(init=False, repr=False)
    _measure: Array = field(init=False, repr=False)
    _samples: Array = field(init=False, repr=False)
    _background: float = field(init=False, repr=False)

    def __post_init__(self) -> None:
        largest = 2.0 * math.sqrt(float(self.occupations.m[-1])) + _BEYOND_TURNING_POINT
        radii, weights = _radial_rule(largest, _RADIAL_NODES)
        object.__setattr__(self, "_radii", radii)
        object.__setattr__(self, "_measure", weights * radii / (4.0 * math.pi))
        object.__setattr__(self, "_samples", self.occupations.samples @ self.occupations.basis(radii))
        object.__setattr__(self, "_background", self._background_energy())

    def _background_energy(self) -> float:
        radii, weights = _radial_rule(_ORBIT_RANGE, _RADIAL_NODES)
        mean = angular_mean(self.problem, self.problem.mass_metric, radii)
        factor = self.occupations.statistics_sign * float(self.occupations.filling)
        return float(factor * np.sum(weights * radii * mean) / (4.0 * math.pi))

    @property
    def n_samples(self) -> int:
        """Number of block samples."""
        return len(self._samples)

    def weights(self, metric: UnimodularMetric) -> Array:
        """A(k) dk on the radial grid."""
        return self._measure * angular_mean(self.problem, metric, self._radii)

    def sample_energies(self, metric: UnimodularMetric) -> Array:
        """E(g) of every block sample, shape (n_samples,)."""
        return np.asarray(self._background + self._samples @ self.weights(metric))

    def energy(self, metric: UnimodularMetric) -> float:
        """Mean E(g) in e^2/(4 pi eps l_B) per electron."""
        return float(self.sample_energies(metric).mean())
