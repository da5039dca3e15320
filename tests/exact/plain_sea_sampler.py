"""Composite-fermion seas by plain Metropolis in NumPy: library theta series, determinants and Ewald sums only.

Positions are u = a + b tau in units of L1. All walkers move the same electron at a time; the matrix of the sea is built
from its definition at every proposal. Slow, and shares no code with the package.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.special import erfc

from tests.exact.orbital_expansion import theta_1
from tests.exact.torus_diagonalisation import madelung_energy
from tests.exact.torus_shapes import cell, waves

Array = NDArray[np.float64]


class PlainSea:
    """``n_walkers`` walkers of the sea at filling 1/2 with the given points."""

    def __init__(self, tau: complex, points: NDArray[np.int64], n_walkers: int, seed: int) -> None:
        self.n = len(points)
        self.tau, self.points = tau, points
        self.lattice = cell(tau, 2 * self.n)
        self.displacements = (points[:, 0] + points[:, 1] * tau) / self.n
        self.displacements = self.displacements - self.displacements.mean()
        self._generator = np.random.default_rng(seed)
        self.a, self.b = self._generator.random((2, n_walkers, self.n)) - 0.5
        u = self.a + self.b * tau
        # factors[w, i, k, a] = theta_1(u_i - u_k - d_a), one on the diagonal.
        self.factors = theta_1(u[:, :, None, None] - u[:, None, :, None] - self.displacements, tau)
        self.factors[:, np.arange(self.n), np.arange(self.n)] = 1.0
        self.log_weight = self._log_weight(self.a, self.b, self.factors)

    def _log_weight(self, a: Array, b: Array, factors: NDArray[np.complex128]) -> Array:
        u = a + b * self.tau
        matrix = np.exp(-2j * math.pi * self.points[:, 1] * u[:, :, None]) * np.prod(factors, axis=2)
        spread = np.sum((b[:, :, None] - b[:, None, :]) ** 2, axis=(1, 2)) / 2.0
        return np.asarray(2.0 * np.linalg.slogdet(matrix)[1] - 4.0 * math.pi * self.tau.imag * spread)

    def sweep(self, step: float) -> float:
        """One proposal per electron from a square of side ``step``; returns the fraction accepted."""
        side = self.lattice[0, 0]
        accepted = 0.0
        for i in range(self.n):
            dx, dy = step * (self._generator.random((2, len(self.a))) - 0.5)
            a, b, factors = self.a.copy(), self.b.copy(), self.factors.copy()
            b[:, i] += dy / (side * self.tau.imag)
            a[:, i] += dx / side - dy * self.tau.real / (side * self.tau.imag)
            a[:, i] -= np.rint(a[:, i])
            b[:, i] -= np.rint(b[:, i])
            u = a + b * self.tau
            difference = (u[:, i, None] - u)[..., None]
            factors[:, i] = theta_1(difference - self.displacements, self.tau)
            factors[:, :, i] = theta_1(-difference - self.displacements, self.tau)
            factors[:, i, i] = 1.0
            log_weight = self._log_weight(a, b, factors)
            accept = self._generator.random(len(a)) < np.exp(np.minimum(log_weight - self.log_weight, 0.0))
            self.a[accept], self.b[accept], self.factors[accept] = a[accept], b[accept], factors[accept]
            self.log_weight[accept] = log_weight[accept]
            accepted += float(accept.mean())
        return accepted / self.n

    def energies(self) -> Array:
        """Coulomb energy per electron of every walker by Ewald summation, shape (n_walkers,)."""
        area = float(np.linalg.det(self.lattice))
        alpha = math.sqrt(math.pi / area)
        first, second = np.triu_indices(self.n, 1)
        difference = np.stack([self.a[:, first] - self.a[:, second], self.b[:, first] - self.b[:, second]], axis=-1)
        reach = np.arange(-4, 5)
        integers = [(int(i), int(j)) for i in reach for j in reach]
        distance = np.stack([np.linalg.norm((difference + shift) @ self.lattice, axis=-1) for shift in integers])
        near = np.sum(erfc(alpha * distance) / distance, axis=0) - 2.0 * math.sqrt(math.pi) / (alpha * area)
        vectors = [m for m in integers if m != (0, 0)]
        q = np.linalg.norm(waves(self.lattice, vectors), axis=1)
        strength = 2.0 * math.pi / (area * q) * erfc(q / (2.0 * alpha))
        far = np.cos(2.0 * math.pi * difference @ np.array(vectors).T) @ strength
        return np.asarray((near + far).sum(axis=1) / self.n + madelung_energy(self.lattice))
