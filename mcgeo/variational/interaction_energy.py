"""Interaction energy of one liquid for any orbit and any metric of the hole, with its derivatives by the hole.

    E(g) = 1/2 int d^2q/(2 pi)^2 v(q) [Sbar(|q|_g) - 1],   v(q) = V(q) F_n(q; g_L)^2,
    Sbar(k) - 1 = e nu + 4 nu sum_m c_m L_m(k^2) exp(-k^2/2).

The constant e nu gives a background that does not depend on g. For the rest put q = S k with S^T S = g, so that |q|_g
= |k|: the correlations delta(s), s = k^2, are then functions of |k| on one fixed radial grid. A metric displaced by the
flat coordinates (x, y), M = x sigma_z + y sigma_x, keeps v(S k) and sees the norm

    k.exp(-M).k = s [1 - x cos 2 phi - y sin 2 phi + (x^2 + y^2)/2 + ...],

so that all derivatives fall upon delta, of which they are known:

    dE/dx    = -<cos 2 phi, s delta'>,         d^2E/dx^2 = <1, s delta'> + <1 + cos 4 phi, s^2 delta''>/2,
    d^2E/dxdy = <sin 4 phi, s^2 delta''>/2,    <f, h> = int d^2k/(8 pi^2) v(S k) f(phi) h(s).

The angular harmonics of v(S k) give the energies, gradients and Hessians of all block samples at once.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import cached_property, lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.special import eval_laguerre

from mcgeo.estimate.occupations import PairOccupations
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.problem import Problem
from mcgeo.variational.derivatives import LocalExpansion
from mcgeo.variational.quadrature import angular_harmonics, angular_mean, half_line_rule, orbit_harmonics

Array = NDArray[np.float64]

# delta(k) of L_m ends beyond its turning point 2 sqrt(m).
_BEYOND_TURNING_POINT = 4.0
_KEPT_LIQUIDS = 4


def basis_derivatives(occupations: PairOccupations, radii: Array) -> Array:
    """f, s f' and s^2 f'' of f(s) = 4 nu L_m(s) exp(-s/2) at s = radii^2, shape (3, n_m, n).

    By s L_m' = m (L_m - L_{m-1}) and Laguerre's equation s L'' = (s - 1) L' - m L (DLMF 18.9.23 and 18.8.1).
    """
    s, m = radii**2, occupations.m[:, None]
    value = occupations.basis(radii)
    below = np.where(m > 0, eval_laguerre(np.maximum(m - 1, 0), s), 0.0) * np.exp(-0.5 * s)
    slope = m * (value - 4.0 * float(occupations.filling) * below)
    return np.stack([value, slope - 0.5 * s * value, s * (0.25 * s - m) * value - slope])


@dataclass(frozen=True, eq=False)
class InteractionEnergy:
    """E_int(g_L, g) of one liquid: orbit and hole metric both free.

    Attributes
    ----------
    uniform : float
        e nu, the part of Sbar - 1 that does not depend on q.
    radii : ndarray, shape (n_k,)
        Nodes |k|.
    coefficients : ndarray, shape (n_samples, n)
        What the samples take of each function.
    projections : ndarray, shape (3, n, n_k)
        k dk/(4 pi) times f, s f' and s^2 f'' of each function at the nodes.
    """

    uniform: float
    radii: Array
    coefficients: Array
    projections: Array

    @cached_property
    def average(self) -> InteractionEnergy:
        """That of the mean of the samples, as one sample of one function."""
        mean = np.einsum("m,dmk->dk", self.coefficients.mean(axis=0), self.projections)
        return replace(self, coefficients=np.ones((1, 1)), projections=mean[:, None, :])

    def background(self, problem: Problem) -> float:
        """(e nu/2) int d^2q/(2 pi)^2 v(q): what does not depend on the hole."""
        radii, weights = half_line_rule(problem.reach)
        mean = angular_mean(problem, problem.orbit.metric, radii)
        return float(self.uniform * np.sum(weights * radii * mean) / (4.0 * math.pi))

    def energies(self, problem: Problem, metric: UnimodularMetric) -> Array:
        """Energies of the samples above the background, shape (n_samples,)."""
        return np.asarray(self.coefficients @ (self.projections[0] @ angular_mean(problem, metric, self.radii)))

    def expansion(self, problem: Problem, metric: UnimodularMetric) -> LocalExpansion:
        """Energies above the background, gradients and Hessians in the flat coordinates about the metric."""
        return self._along_hole(self.projections @ angular_harmonics(problem, metric, self.radii))

    def _along_hole(self, projected: Array) -> LocalExpansion:
        """Expansion from the harmonics' integrals with f, s f' and s^2 f'', shape (3, n, 5)."""
        value, first, second = projected
        columns = [
            value[:, 0],
            -first[:, 1],
            -first[:, 2],
            first[:, 0] + 0.5 * (second[:, 0] + second[:, 3]),
            first[:, 0] + 0.5 * (second[:, 0] - second[:, 3]),
            0.5 * second[:, 4],
        ]
        found = self.coefficients @ np.array(columns).T
        return LocalExpansion(found[:, 0], found[:, 1:3], found[:, [3, 5, 5, 4]].reshape(-1, 2, 2))

    def background_expansion(self, problem: Problem) -> LocalExpansion:
        """The background in the flat coordinates of the orbit about its metric, as one sample."""
        radii, weights = half_line_rule(problem.reach)
        harmonics = orbit_harmonics(problem, problem.orbit.metric, radii)[:, :, 0]
        v = self.uniform / (4.0 * math.pi) * (harmonics @ (weights * radii))
        return LocalExpansion(v[:1], v[None, 1:3], v[[3, 4, 4, 5]].reshape(1, 2, 2))

    def joint_expansion(self, problem: Problem, metric: UnimodularMetric) -> LocalExpansion:
        """Energies above the background in the flat coordinates of the orbit (first two) and of the hole."""
        harmonics = orbit_harmonics(problem, metric, self.radii)
        hole = self._along_hole(self.projections @ harmonics[0])
        by_orbit = self.projections[0] @ harmonics[1:, :, 0].T
        mixed = -(self.projections[1] @ harmonics[1:3, :, 1:3])
        n = len(self.coefficients)
        hessian = np.empty((n, 4, 4))
        orbit = self.coefficients @ by_orbit
        hessian[:, :2, :2] = orbit[:, [2, 3, 3, 4]].reshape(n, 2, 2)
        hessian[:, :2, 2:] = np.moveaxis(self.coefficients @ mixed, 0, 1)
        hessian[:, 2:, :2] = np.swapaxes(hessian[:, :2, 2:], 1, 2)
        hessian[:, 2:, 2:] = hole.hessian
        return LocalExpansion(hole.energy, np.concatenate([orbit[:, :2], hole.gradient], axis=1), hessian)


@lru_cache(maxsize=_KEPT_LIQUIDS)
def interaction_energy(occupations: PairOccupations) -> InteractionEnergy:
    """`InteractionEnergy` of a liquid, made once."""
    radii, weights = half_line_rule(2.0 * math.sqrt(float(occupations.m[-1])) + _BEYOND_TURNING_POINT)
    return InteractionEnergy(
        occupations.statistics_sign * float(occupations.filling),
        radii,
        occupations.samples,
        weights * radii / (4.0 * math.pi) * basis_derivatives(occupations, radii),
    )
