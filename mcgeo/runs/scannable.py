"""What a scan needs of a liquid, be it sampled, a droplet, or out of the catalogue."""

from __future__ import annotations

from typing import Any, Protocol

from mcgeo.problem.problem import Problem
from mcgeo.variational.energy_surface import Surface
from mcgeo.variational.variation import Variation


class Scannable(Protocol):
    """A liquid with an energy over the metric of its hole."""

    def energy_surface(self, problem: Problem, variation: Variation) -> Surface:
        """Energy of every sample over the hole's metric.

        Raises
        ------
        ConfigError
            If the liquid has no answer to the problem.
        """

    def state_summary(self) -> dict[str, Any]:
        """``state`` of the JSON output."""

    def diagnostics_summary(self) -> dict[str, Any]:
        """``diagnostics`` of the JSON output."""
