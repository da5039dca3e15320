"""What a liquid is wherever it lives, on the torus or in a droplet: inherit from one of these."""

from __future__ import annotations

from fractions import Fraction

from mcgeo.states.base import BOSONS, FERMIONS


class LaughlinLiquid:
    """Laughlin 1/m."""

    exponent: int

    @property
    def filling(self) -> Fraction:
        """1/m."""
        return Fraction(1, self.exponent)

    @property
    def statistics(self) -> str:
        """Fermions for odd m."""
        return FERMIONS if self.exponent % 2 else BOSONS


class MooreReadLiquid:
    """Moore-Read 1/m."""

    exponent: int

    @property
    def filling(self) -> Fraction:
        """1/m."""
        return Fraction(1, self.exponent)

    @property
    def statistics(self) -> str:
        """Fermions for even m: the Pfaffian is antisymmetric itself."""
        return BOSONS if self.exponent % 2 else FERMIONS
