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
from abc import ABC, abstractmethod
from dataclasses import dataclass, field
from functools import cache
from typing import Protocol, Self

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.estimate.occupations import PairOccupations
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.problem import Problem
from mcgeo.variational.derivatives import LocalExpansion, expansion

Array = NDArray[np.float64]

_LEAST_NODES = 200
_NODES_PER_UNIT = 12.0
# Below this |k| the nodes crowd towards 0, as far as exp(-pi sinh 5.3) = 1e-137; the last one is 1e-16 short of 1.
_INNER = 1.0
_INNER_RANGE = (-5.3, 3.2)
_INNER_NODES = 96
# delta(k) of L_m ends beyond its turning point 2 sqrt(m).
_BEYOND_TURNING_POINT = 4.0
LARGEST_DISTANCE = 4.0
_LEAST_DISTANCE = 1e-3
_HARMONICS_TO = 26.0


@cache
def _legendre(n: int) -> tuple[Array, Array]:
    """Nodes and weights of Gauss-Legendre; finding them takes as long as twenty energies."""
    x, weights = np.polynomial.legendre.leggauss(n)
    x.flags.writeable = weights.flags.writeable = False
    return x, weights


def _radial_rule(largest: float) -> tuple[Array, Array]:
    """Nodes and weights on (0, ``largest``), largest > 1.

    Gauss-Legendre beyond 1 and the double-exponential rule below, which any power of k and any scale of V(q) at small q
    suit (H. Takahasi and M. Mori, Publ. RIMS Kyoto Univ. 9, 721 (1974)).
    """
    x, weights = _legendre(max(_LEAST_NODES, math.ceil(_NODES_PER_UNIT * largest)))
    half = 0.5 * (largest - _INNER)
    t, step = np.linspace(*_INNER_RANGE, _INNER_NODES, retstep=True)
    inner = _INNER / (1.0 + np.exp(-math.pi * np.sinh(t)))
    # d/dt of 1/(1 + e^-u) is 1/(2 + 2 cosh u) du/dt.
    inner_weights = _INNER * step * math.pi * np.cosh(t) / (2.0 + 2.0 * np.cosh(math.pi * np.sinh(t)))
    return np.concatenate([inner, _INNER + half * (x + 1.0)]), np.concatenate([inner_weights, half * weights])


def _n_angles(distance: float) -> int:
    """Equidistant angles on half a turn that resolve one metric's norm, or exp(-k^2 ...), in another's frame.

    Harmonic n of the angle falls as tanh(distance/2)^n; the rule goes on to 5e-12 and eight angles more.
    """
    return 8 + math.ceil(_HARMONICS_TO / -math.log(math.tanh(0.5 * max(distance, _LEAST_DISTANCE))))


def _distance(first: UnimodularMetric, second: UnimodularMetric) -> float:
    """arccosh(Tr(g1^-1 g2)/2), to 1e-8, which is enough to size a rule and quicker than `UnimodularMetric.distance`."""
    return math.acosh(max(1.0, 0.5 * float(np.sum(first.inverse_matrix * second.matrix))))


def angular_mean(problem: Problem, metric: UnimodularMetric, radii: Array) -> Array:
    """(1/2 pi) int dphi v(S k(phi)) at |k| of shape (n,), shape (n,); the trapezoidal rule on half a turn.

    Raises
    ------
    GeometryError
        If metric and orbit are farther apart than 4 (relative aspect ratio 55).
    """
    distance = _distance(metric, problem.orbit.metric)
    if distance > LARGEST_DISTANCE:
        raise GeometryError(
            f"hole and orbit metric are {distance:.3g} apart (relative aspect ratio {math.exp(distance):.3g}); "
            f"at most {LARGEST_DISTANCE:g} works"
        )
    n_angles = _n_angles(max(distance, *(_distance(metric, other) for other in problem.interaction.metrics)))
    phi = math.pi * (np.arange(n_angles) + 0.5) / n_angles
    directions = metric.linear_map @ np.stack([np.cos(phi), np.sin(phi)])
    mean = np.zeros(len(radii))
    # |S k|_L >= |k| exp(-distance/2): beyond the reach of v(q) every angle gives nothing.
    inside = radii <= problem.reach * math.exp(0.5 * distance)
    # Components along the first axis in memory: either one is then read in one piece.
    wavevectors = (radii[inside, None] * directions[:, None, :]).transpose(1, 2, 0)
    mean[inside] = problem.effective_potential(wavevectors).mean(axis=1)
    return mean


class Surface(Protocol):
    """Energy per electron over the metric of the hole, for every block sample."""

    @property
    def problem(self) -> Problem:
        """The question put."""

    def sample_energies(self, metric: UnimodularMetric) -> Array:
        """E(g) of every block sample in e^2/(4 pi eps l_B) per electron, shape (n_samples,)."""

    def energy(self, metric: UnimodularMetric) -> float:
        """Mean E(g)."""

    def expansion_about(self, metric: UnimodularMetric) -> LocalExpansion:
        """Gradient and Hessian of every sample in the flat coordinates about a metric."""

    @property
    def search(self) -> Surface:
        """A surface that is quick to evaluate and has its minimum nearby; the surface itself if that is quick."""


class DirectSurface(ABC):
    """A surface whose sample energies are quick: derivatives by differences, mean from the samples."""

    @abstractmethod
    def sample_energies(self, metric: UnimodularMetric) -> Array:
        """E(g) of every block sample, shape (n_samples,)."""

    def energy(self, metric: UnimodularMetric) -> float:
        """Mean E(g)."""
        return float(self.sample_energies(metric).mean())

    def expansion_about(self, metric: UnimodularMetric) -> LocalExpansion:
        """Gradient and Hessian of every sample; all are linear in the samples."""
        return expansion(lambda point: self.sample_energies(metric.displaced(*point)), 2)

    @property
    def search(self) -> Self:
        """The surface itself."""
        return self


@dataclass(frozen=True, eq=False)
class InteractionEnergy:
    """E_int(g_L, g) of one liquid: orbit and hole metric both free.

    Parameters
    ----------
    occupations : PairOccupations
    """

    occupations: PairOccupations
    _radii: Array = field(init=False, repr=False)
    _measure: Array = field(init=False, repr=False)
    _samples: Array = field(init=False, repr=False)
    _mean: Array = field(init=False, repr=False)

    def __post_init__(self) -> None:
        largest = 2.0 * math.sqrt(float(self.occupations.m[-1])) + _BEYOND_TURNING_POINT
        radii, weights = _radial_rule(largest)
        samples = self.occupations.samples @ self.occupations.basis(radii)
        object.__setattr__(self, "_radii", radii)
        object.__setattr__(self, "_measure", weights * radii / (4.0 * math.pi))
        object.__setattr__(self, "_samples", samples)
        object.__setattr__(self, "_mean", samples.mean(axis=0))

    def background(self, problem: Problem) -> float:
        """(e nu/2) int d^2q/(2 pi)^2 v(q): what does not depend on the hole."""
        radii, weights = _radial_rule(problem.reach)
        mean = angular_mean(problem, problem.orbit.metric, radii)
        factor = self.occupations.statistics_sign * float(self.occupations.filling)
        return float(factor * np.sum(weights * radii * mean) / (4.0 * math.pi))

    def weights(self, problem: Problem, metric: UnimodularMetric) -> Array:
        """A(k) dk on the radial grid, the orbit being that of the problem."""
        return self._measure * angular_mean(problem, metric, self._radii)

    def correlation_samples(self, problem: Problem, metric: UnimodularMetric) -> Array:
        """Energy of every block sample above the background."""
        return np.asarray(self._samples @ self.weights(problem, metric))

    def correlation_mean(self, problem: Problem, metric: UnimodularMetric) -> float:
        """Mean energy above the background."""
        return float(self._mean @ self.weights(problem, metric))


@dataclass(frozen=True, eq=False)
class EnergySurface(DirectSurface):
    """E(g) of one liquid in a projected problem: the orbit is that of the mass; see `Surface`.

    Parameters
    ----------
    occupations : PairOccupations
    problem : Problem
    """

    occupations: PairOccupations
    problem: Problem
    _interaction: InteractionEnergy = field(init=False, repr=False)
    _background: float = field(init=False, repr=False)

    def __post_init__(self) -> None:
        interaction = InteractionEnergy(self.occupations)
        object.__setattr__(self, "_interaction", interaction)
        object.__setattr__(self, "_background", interaction.background(self.problem))

    def sample_energies(self, metric: UnimodularMetric) -> Array:
        """E(g) of every block sample, shape (n_samples,)."""
        return self._background + self._interaction.correlation_samples(self.problem, metric)

    def energy(self, metric: UnimodularMetric) -> float:
        """Mean E(g)."""
        return self._background + self._interaction.correlation_mean(self.problem, metric)
