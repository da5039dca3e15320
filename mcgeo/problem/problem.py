"""The question put to a liquid: which orbit, which interaction, which level."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.interaction import Interaction
from mcgeo.problem.landau_level import form_factor_sq


@dataclass(frozen=True)
class Problem:
    """A projected problem: the orbit's shape is that of the mass, the hole's shape is free.

    Parameters
    ----------
    mass_metric : UnimodularMetric
        g_m; the orbit metric g_L equals it.
    interaction : Interaction
    level : int
        Landau level n.
    """

    mass_metric: UnimodularMetric
    interaction: Interaction
    level: int = 0

    def effective_potential(self, wavevectors: NDArray[np.float64]) -> NDArray[np.float64]:
        """v(q) = V(q) F_n(q; g_m)^2, the interaction of guiding centres, for wavevectors of shape (..., 2)."""
        return self.interaction.potential(wavevectors) * form_factor_sq(wavevectors, self.level, self.mass_metric)

    def with_mass(self, mass_metric: UnimodularMetric) -> Problem:
        """The same problem for another mass metric."""
        return Problem(mass_metric, self.interaction, self.level)

    @property
    def is_symmetric(self) -> bool:
        """True when mass and interaction are both isotropic, so that symmetry alone makes Q = 0 stationary."""
        isotropic = self.interaction.symmetry is not None and self.interaction.symmetry.stretch == 0.0
        return isotropic and self.mass_metric.stretch == 0.0
