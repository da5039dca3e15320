"""The question put to a liquid: which orbit, which interaction, which level."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.interaction import Interaction
from mcgeo.problem.landau_level import LandauOrbit, Orbit, form_factor_derivatives
from mcgeo.problem.tilted_field import TiltedField, TiltedOrbit


@dataclass(frozen=True)
class Problem:
    """A projected problem: the orbit's shape is that of mass and field, the hole's shape is free.

    Parameters
    ----------
    mass_metric : UnimodularMetric
        g_m; the orbit metric g_L equals it when the field is not tilted.
    interaction : Interaction
    level : int
        Landau level n.
    tilt : TiltedField or None
        Tilted field and parabolic well; None: a field across an infinitely thin layer.
    """

    mass_metric: UnimodularMetric
    interaction: Interaction
    level: int = 0
    tilt: TiltedField | None = None

    @cached_property
    def orbit(self) -> Orbit:
        """Orbit of one electron."""
        if self.tilt is None:
            return LandauOrbit(self.mass_metric, self.level)
        return TiltedOrbit(self.mass_metric, self.tilt, self.level)

    def effective_potential(self, wavevectors: NDArray[np.float64]) -> NDArray[np.float64]:
        """v(q), the interaction of guiding centres, for wavevectors of shape (..., 2).

        V(q) F_n(q; g_m)^2, or the integral over q_z of `TiltedOrbit.effective_potential`.
        """
        return self.orbit.effective_potential(wavevectors, self.interaction)

    def orbit_derivatives(self, wavevectors: NDArray[np.float64]) -> NDArray[np.float64]:
        """v(q) and its derivatives v_x, v_y, v_xx, v_xy, v_yy by the flat coordinates of the orbit, shape (6, ...).

        Raises
        ------
        GeometryError
            In a tilted field, where the orbit is that of mass and field.
        """
        if self.tilt is not None:
            raise GeometryError("the orbit's shape can vary in a field across the plane only")
        factors = form_factor_derivatives(wavevectors, self.level, self.orbit.metric)
        found = np.empty(factors.shape)
        found[:] = self.interaction.guiding_centre_potential(wavevectors, factors)
        # Parts that act on guiding centres themselves do not know the orbit.
        found[1:] -= self.interaction.guiding_centre_potential(wavevectors, np.zeros_like(factors[0]))
        return found

    @property
    def reach(self) -> float:
        """Norm |q| in the orbit's metric beyond which v(q) is negligible."""
        return self.interaction.guiding_centre_reach(self.orbit.metric, self.orbit.reach)

    def with_mass(self, mass_metric: UnimodularMetric) -> Problem:
        """The same problem for another mass metric."""
        return replace(self, mass_metric=mass_metric)

    def untilted(self) -> Problem:
        """The same problem in the same well, the field across the plane."""
        return self if self.tilt is None else replace(self, tilt=replace(self.tilt, angle=0.0))

    @property
    def is_symmetric(self) -> bool:
        """True when nothing prefers a direction, so that symmetry alone makes Q = 0 stationary."""
        isotropic = self.interaction.symmetry is not None and self.interaction.symmetry.stretch == 0.0
        upright = self.tilt is None or self.tilt.angle == 0.0
        return isotropic and upright and self.mass_metric.stretch == 0.0
