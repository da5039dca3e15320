"""Energy per electron over the metric of the hole: what a minimum, a response and a figure ask for."""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from functools import cached_property
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.occupations import PairOccupations
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.problem import Problem
from mcgeo.variational.derivatives import LocalExpansion, expansion
from mcgeo.variational.interaction_energy import InteractionEnergy, interaction_energy
from mcgeo.variational.ray_table import rough_energies

Array = NDArray[np.float64]


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

    def mean_expansion(self, metric: UnimodularMetric) -> LocalExpansion:
        """That of the mean, as one sample."""

    def rough_energies(self, points: Array) -> Array:
        """Energies, up to a constant and about 1e-3, at flat coordinates about the orbit, shape (n, 2) to (n,)."""


class DirectSurface(ABC):
    """A surface that supplies energies only: derivatives by differences."""

    problem: Problem

    @abstractmethod
    def sample_energies(self, metric: UnimodularMetric) -> Array:
        """E(g) of every block sample, shape (n_samples,)."""

    def energy(self, metric: UnimodularMetric) -> float:
        """Mean E(g)."""
        return float(self.sample_energies(metric).mean())

    def expansion_about(self, metric: UnimodularMetric) -> LocalExpansion:
        """Gradient and Hessian of every sample; all are linear in the samples."""
        return expansion(lambda point: self.sample_energies(metric.displaced(*point)), 2)

    def mean_expansion(self, metric: UnimodularMetric) -> LocalExpansion:
        """Gradient and Hessian of the mean."""
        return expansion(lambda point: np.array([self.energy(metric.displaced(*point))]), 2)

    def rough_energies(self, points: Array) -> Array:
        """Energies one by one."""
        centre = self.problem.orbit.metric
        return np.array([self.energy(centre.displaced(*point)) for point in points])


@dataclass(frozen=True, eq=False)
class EnergySurface:
    """E(g) of one liquid in a projected problem: the orbit is that of the mass; see `Surface`.

    Parameters
    ----------
    occupations : PairOccupations
    problem : Problem
    """

    occupations: PairOccupations
    problem: Problem
    @property
    def _interaction(self) -> InteractionEnergy:
        return interaction_energy(self.occupations)

    @cached_property
    def _background(self) -> float:
        return self._interaction.background(self.problem)

    def sample_energies(self, metric: UnimodularMetric) -> Array:
        """E(g) of every block sample, shape (n_samples,)."""
        return self._background + self._interaction.energies(self.problem, metric)

    def energy(self, metric: UnimodularMetric) -> float:
        """Mean E(g)."""
        return self._background + float(self._interaction.average.energies(self.problem, metric)[0])

    def expansion_about(self, metric: UnimodularMetric) -> LocalExpansion:
        """Energy, gradient and Hessian of every sample in the flat coordinates about a metric."""
        return self._interaction.expansion(self.problem, metric).above(self._background)

    def mean_expansion(self, metric: UnimodularMetric) -> LocalExpansion:
        """That of the mean."""
        return self._interaction.average.expansion(self.problem, metric).above(self._background)

    def rough_energies(self, points: Array) -> Array:
        """Energies above the background by tables along rays; see `mcgeo.variational.ray_table`."""
        return rough_energies(self.occupations, self.problem, points)
