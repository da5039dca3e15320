"""What a liquid is wherever it lives, on the torus or in a droplet: inherit from one of these."""

from __future__ import annotations

from fractions import Fraction

from mcgeo.states.base import BOSONS, FERMIONS


class _OneOverExponent:
    """Filling 1/m of a Jastrow exponent m."""

    exponent: int

    @property
    def filling(self) -> Fraction:
        """1/m."""
        return Fraction(1, self.exponent)


class LaughlinLiquid(_OneOverExponent):
    """Laughlin 1/m."""

    @property
    def statistics(self) -> str:
        """Fermions for odd m."""
        return FERMIONS if self.exponent % 2 else BOSONS


class MooreReadLiquid(_OneOverExponent):
    """Moore-Read 1/m."""

    @property
    def statistics(self) -> str:
        """Fermions for even m: the Pfaffian is antisymmetric itself."""
        return BOSONS if self.exponent % 2 else FERMIONS
