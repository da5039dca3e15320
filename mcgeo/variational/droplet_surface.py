"""Energy per electron of a droplet over the metric of its guiding centres.

Electrons on orbits of metric g_L whose guiding centres form a droplet of metric g, neutralised by the uniform ellipse
of that metric g. With q = S k, S^T S = g, the form factor f = L_n(|q|^2_L/2) exp(-|q|^2_L/4) of one orbit and the
transforms n, G and n_b of `mcgeo.estimate.droplet_occupations`,

    E_ee = 1/2 int d^2q/(2 pi)^2 V f^2 G(|k|),
    E_eb = -1/N int d^2q/(2 pi)^2 V f n(|k|) n_b(|k|),
    E_bb = 1/2N int d^2q/(2 pi)^2 V n_b(|k|)^2.

A droplet of definite angular momentum depends on |k| alone: a metric enters through the means of V f^2, V f and V over
the directions of k. At g_L = g in the lowest level this is the energy of the product wavefunction itself.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.polynomial.legendre import leggauss
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.estimate.droplet_occupations import DropletOccupations
from mcgeo.geometry.ellipse import stretch_factor
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.landau_level import laguerre
from mcgeo.problem.problem import Problem
from mcgeo.variational.energy_surface import DirectSurface
from mcgeo.variational.radial_rule import RadialRule, radial_rule

Array = NDArray[np.float64]

_LARGEST_DISTANCE = 4.0
# Laguerre functions of k^2/2 are below 1e-15 this far beyond their turning point k = sqrt(8 l).
_BEYOND_TURNING_POINT = 9.0
# exp(-q^2/4) of the orbit is below 1e-17 here, in its own metric.
_ORBIT_RANGE = 12.5
# Beyond this kR only the mean of n_b^2 ~ (1 - sin 2kR)/k^3 is kept; at such an end the rest integrates to zero in
# leading order.
_LARGEST_PHASE = 636.5 * math.pi / 2.0
_TAIL_NODES = 16


@dataclass(frozen=True)
class EnergyParts:
    """Energies per electron of the block samples, shape (n_samples,), and of the background with itself."""

    electron_electron: Array
    electron_background: Array
    background_background: float

    @property
    def total(self) -> Array:
        """Their sum."""
        return self.electron_electron + self.electron_background + self.background_background


def _directions(problem: Problem, metric: UnimodularMetric) -> Array:
    """S times unit vectors on half a turn, shape (n, 2), to resolve orbit and interaction.

    Raises
    ------
    GeometryError
        If hole and orbit metric are farther apart than 4 (relative aspect ratio 55).
    """
    distance = metric.distance(problem.mass_metric)
    if distance > _LARGEST_DISTANCE:
        raise GeometryError(
            f"hole and orbit metric are {distance:.3g} apart (relative aspect ratio {math.exp(distance):.3g}); "
            f"at most {_LARGEST_DISTANCE:g} works"
        )
    distance = max(distance, *(metric.distance(other) for other in problem.interaction.metrics))
    n = 16 * math.ceil(3.0 * math.exp(0.75 * distance))
    phi = math.pi * (np.arange(n) + 0.5) / n
    return np.asarray(np.stack([np.cos(phi), np.sin(phi)], axis=-1) @ metric.linear_map.T)


@dataclass(frozen=True, eq=False)
class DropletInteraction:
    """Energies of one droplet for any orbit, interaction and metric.

    Parameters
    ----------
    occupations : DropletOccupations
    """

    occupations: DropletOccupations

    @cached_property
    def _rule(self) -> RadialRule:
        radius = max(self.occupations.radius, math.sqrt(2.0 * self.occupations.orbital_samples.shape[1]))
        # The largest l of an orbital is about R^2/2, that of a pair about R^2: the turning points are at k = 2R.
        largest = min(2.0 * radius + _BEYOND_TURNING_POINT, _ORBIT_RANGE * math.exp(0.5 * _LARGEST_DISTANCE))
        return radial_rule(largest, 2.0 * radius + 2.0)

    @cached_property
    def _pairs(self) -> Array:
        return np.asarray(
            self.occupations.pair_samples @ (self.occupations.pair_basis(self._rule.fine) @ self._rule.projection)
        )

    @cached_property
    def _charges(self) -> Array:
        """Of n(k) n_b(k)."""
        fine = self._rule.fine
        basis = self.occupations.density_basis(fine) * self.occupations.background(fine)
        return np.asarray(self.occupations.orbital_samples @ (basis @ self._rule.projection))

    @cached_property
    def _background(self) -> tuple[Array, Array]:
        """Nodes and weights of int dk h(k) n_b(k)^2, up to infinity."""
        radius, n = self.occupations.radius, self.occupations.n_electrons
        largest = _LARGEST_PHASE / radius
        rule = radial_rule(largest, 2.0 * radius)
        weights = self.occupations.background(rule.fine) ** 2 @ rule.projection
        # Beyond, n_b^2 has the mean 4N^2/(pi R^3 k^3); k = largest/t.
        x, w = leggauss(_TAIL_NODES)
        t = 0.5 * (x + 1.0)
        tail = 0.5 * w * t * 4.0 * n**2 / (math.pi * radius**3 * largest**2)
        return np.concatenate([rule.nodes, largest / t]), np.concatenate([weights, tail])

    def parts(self, problem: Problem, metric: UnimodularMetric) -> EnergyParts:
        """The three energies of every block sample."""
        pair_weights, charge_weights = self._weights(problem, metric)
        return EnergyParts(
            self._pairs @ pair_weights, self._charges @ charge_weights, self.background_energy(problem, metric)
        )

    def mean(self, problem: Problem, metric: UnimodularMetric) -> float:
        """Mean total energy."""
        pair_weights, charge_weights = self._weights(problem, metric)
        pairs, charges = self._means
        return float(pairs @ pair_weights + charges @ charge_weights) + self.background_energy(problem, metric)

    @cached_property
    def _means(self) -> tuple[Array, Array]:
        return self._pairs.mean(axis=0), self._charges.mean(axis=0)

    def _weights(self, problem: Problem, metric: UnimodularMetric) -> tuple[Array, Array]:
        """h(k) on the nodes for E_ee and E_eb."""
        k = self._rule.nodes
        waves = k[:, None, None] * _directions(problem, metric)
        half = 0.5 * problem.mass_metric.wavevector_norm_sq(waves)
        form_factor = np.exp(-0.5 * half) * laguerre(problem.level, half)
        seen_by_background = problem.interaction.potential(waves) * form_factor
        pairs = k * (seen_by_background * form_factor).mean(axis=1) / (4.0 * math.pi)
        charges = -k * seen_by_background.mean(axis=1) / (2.0 * math.pi * self.occupations.n_electrons)
        return pairs, charges

    def background_energy(self, problem: Problem, metric: UnimodularMetric) -> float:
        """E_bb; 8N/(3 pi R) times `mcgeo.geometry.ellipse.stretch_factor` where V is a Coulomb interaction."""
        n, radius = self.occupations.n_electrons, self.occupations.radius
        if isinstance(problem.interaction, Coulomb):
            relative = metric.relative_to(problem.interaction.symmetry)
            return stretch_factor(relative) * 8.0 * n / (3.0 * math.pi * radius)
        k, weights = self._background
        waves = k[:, None, None] * _directions(problem, metric)
        mean = problem.interaction.potential(waves).mean(axis=1)
        return float(np.sum(weights * k * mean) / (4.0 * math.pi * n))


@dataclass(frozen=True, eq=False)
class DropletSurface(DirectSurface):
    """E(g) of one droplet in a projected problem; see `mcgeo.variational.energy_surface.Surface`."""

    interaction: DropletInteraction
    problem: Problem

    def sample_energies(self, metric: UnimodularMetric) -> Array:
        """E(g) of every block sample, shape (n_samples,)."""
        return self.interaction.parts(self.problem, metric).total

    def energy(self, metric: UnimodularMetric) -> float:
        """Mean E(g)."""
        return self.interaction.mean(self.problem, metric)
