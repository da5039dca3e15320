"""Quadrature over the plane of wavevectors in the hole's frame: radial nodes, and angular harmonics of v(q)."""

from __future__ import annotations

import math
from functools import cache
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.problem import Problem

Array = NDArray[np.float64]

LARGEST_DISTANCE = 4.0

_LEAST_NODES = 100
_NODES_PER_UNIT = 9.0
# Below this |k| the nodes crowd towards 0, as far as exp(-pi sinh 5.3) = 1e-137; the last one is 1e-16 short of 1.
_INNER = 1.0
_INNER_RANGE = (-5.3, 3.2)
_INNER_NODES = 128
_LEAST_DISTANCE = 1e-3
_HARMONICS_TO = 26.0
_SAME_AXIS = 1e-13


@cache
def _legendre(n: int) -> tuple[Array, Array]:
    """Nodes and weights of Gauss-Legendre; finding them takes as long as twenty energies."""
    x, weights = np.polynomial.legendre.leggauss(n)
    x.flags.writeable = weights.flags.writeable = False
    return x, weights


@cache
def half_line_rule(largest: float) -> tuple[Array, Array]:
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
    nodes = np.concatenate([inner, _INNER + half * (x + 1.0)])
    all_weights = np.concatenate([inner_weights, half * weights])
    nodes.flags.writeable = all_weights.flags.writeable = False
    return nodes, all_weights


def _n_angles(distance: float) -> int:
    """Equidistant angles on half a turn that resolve one metric's norm, or exp(-k^2 ...), in another's frame.

    Harmonic n of the angle falls as tanh(distance/2)^n; the rule goes on to 5e-12 and eight angles more. Even, so that
    the angles are mirror images of each other.
    """
    wanted = 8 + math.ceil(_HARMONICS_TO / -math.log(math.tanh(0.5 * max(distance, _LEAST_DISTANCE))))
    return wanted + wanted % 2


@cache
def _angles(n: int, mirrored: bool) -> tuple[Array, Array]:
    """Unit vectors (2, n') at equidistant angles phi of half a turn, and 1, cos 2, sin 2, cos 4, sin 4 phi over n'.

    Those of a quarter turn only, n' = n/2, where v(q) is its own mirror image: the sines then have no part.
    """
    phi = math.pi * (np.arange(n // 2 if mirrored else n) + 0.5) / n
    odd = 0.0 if mirrored else 1.0
    waves = [np.ones_like(phi), np.cos(2 * phi), odd * np.sin(2 * phi), np.cos(4 * phi), odd * np.sin(4 * phi)]
    return np.stack([np.cos(phi), np.sin(phi)]), np.stack(waves, axis=-1) / len(phi)


def _distance(first: UnimodularMetric, second: UnimodularMetric) -> float:
    """arccosh(Tr(g1^-1 g2)/2), to 1e-8, which is enough to size a rule and quicker than `UnimodularMetric.distance`."""
    turned = math.cos(2.0 * (first.angle - second.angle))
    half_trace = math.cosh(first.stretch) * math.cosh(second.stretch)
    return math.acosh(max(1.0, half_trace - math.sinh(first.stretch) * math.sinh(second.stretch) * turned))


def _mirror_axis(problem: Problem, metric: UnimodularMetric) -> float | None:
    """Angle of an axis that hole, mass, field and interaction share, or None."""
    symmetry = problem.interaction.symmetry
    if symmetry is None:
        return None
    angles = [g.angle for g in (metric, problem.mass_metric, symmetry) if g.stretch > 0.0]
    if problem.tilt is not None and problem.tilt.angle > 0.0:
        angles.append(problem.tilt.direction)
    if not angles:
        return 0.0
    return angles[0] if all(abs(math.sin(2.0 * (a - angles[0]))) < _SAME_AXIS for a in angles[1:]) else None


def require_resolved(problem: Problem, metric: UnimodularMetric) -> float:
    """Distance of metric and orbit.

    Raises
    ------
    GeometryError
        If it is above 4 (relative aspect ratio 55).
    """
    distance = _distance(metric, problem.orbit.metric)
    if distance > LARGEST_DISTANCE:
        raise GeometryError(
            f"hole and orbit metric are {distance:.3g} apart (relative aspect ratio {math.exp(distance):.3g}); "
            f"at most {LARGEST_DISTANCE:g} works"
        )
    return distance


def angular_mean(problem: Problem, metric: UnimodularMetric, radii: Array) -> Array:
    """(1/2 pi) int dphi v(S k(phi)), S the root of the metric, shape (n,).

    The trapezoidal rule on half a turn, or on a quarter where metric, orbit and interaction share their axes.

    Parameters
    ----------
    problem : Problem
    metric : UnimodularMetric
    radii : ndarray, shape (n,)
        |k|, ascending.

    Raises
    ------
    GeometryError
        If metric and orbit are farther apart than 4 (relative aspect ratio 55).
    """
    grid = _polar_grid(problem, metric, radii, _mirror_axis(problem, metric))
    found = np.zeros(len(radii))
    found[: len(grid.wavevectors)] = problem.effective_potential(grid.wavevectors) @ grid.waves[:, 0]
    return found


def angular_harmonics(problem: Problem, metric: UnimodularMetric, radii: Array) -> Array:
    """The same of v times 1, cos 2 phi, sin 2 phi, cos 4 phi and sin 4 phi, shape (n, 5)."""
    grid = _polar_grid(problem, metric, radii, _mirror_axis(problem, metric))
    found = np.zeros((len(radii), 5))
    found[: len(grid.wavevectors)] = problem.effective_potential(grid.wavevectors) @ grid.harmonics
    return found


def orbit_harmonics(problem: Problem, metric: UnimodularMetric, radii: Array) -> Array:
    """That of v and its derivatives by the orbit's metric, `Problem.orbit_derivatives`: shape (6, n, 5)."""
    grid = _polar_grid(problem, metric, radii, None)
    found = np.zeros((6, len(radii), 5))
    found[:, : len(grid.wavevectors)] = problem.orbit_derivatives(grid.wavevectors) @ grid.harmonics
    return found


class _PolarGrid(NamedTuple):
    """Wavevectors S k, shape (n, n_angles, 2), at angles that are counted from ``turn``."""

    wavevectors: Array
    waves: Array
    turn: float

    @property
    def harmonics(self) -> Array:
        """Harmonics of the lab's angle over their number, shape (n_angles, 5)."""
        return np.asarray(self.waves @ _turned(self.turn))


def _polar_grid(problem: Problem, metric: UnimodularMetric, radii: Array, axis: float | None) -> _PolarGrid:
    """The wavevectors that a rule needs, up to the reach of v(q); ``axis`` that of mirror images."""
    distance = require_resolved(problem, metric)
    n_angles = _n_angles(max(distance, *(_distance(metric, other) for other in problem.interaction.metrics)))
    units, waves = _angles(n_angles, axis is not None)
    turn = metric.angle if axis is None else axis
    c, s = math.cos(turn), math.sin(turn)
    directions = metric.linear_map @ np.array([[c, -s], [s, c]]) @ units
    # |S k|_L >= |k| exp(-distance/2): beyond the reach of v(q) every angle gives nothing.
    inside = int(np.searchsorted(radii, problem.reach * math.exp(0.5 * distance), side="right"))
    # Components along the first axis in memory: either one is then read in one piece.
    wavevectors = (radii[:inside, None] * directions[:, None, :]).transpose(1, 2, 0)
    return _PolarGrid(wavevectors, waves, turn)


def _turned(angle: float) -> Array:
    """Harmonics of phi from those of phi - ``angle``, to be multiplied from the right, shape (5, 5)."""
    turn = np.zeros((5, 5))
    turn[0, 0] = 1.0
    for first in (1, 3):
        c, s = math.cos((first + 1) * angle), math.sin((first + 1) * angle)
        turn[first : first + 2, first : first + 2] = [[c, s], [-s, c]]
    return turn
