"""Keys of ``state``: which liquid is sampled. A new kind is one model here and one entry in `StateConfig`."""

from __future__ import annotations

from fractions import Fraction
from typing import Annotated, Literal

from pydantic import Field, StrictBool, ValidationInfo, field_validator

from mcgeo.runs.config_types import Electrons, Group, ListOf, NotBool, OneOfFractions, Real, WholeNumber, rule

_CONJUGATE = "True for the particle-hole conjugate liquid at filling 1 minus that of the state."


class MetricConfig(Group):
    """Hole metric the state is sampled in."""

    stretch: Annotated[Real, Field(ge=0.0, le=5.0)] = Field(
        default=0.0, description="Stretch Q of the metric, e^Q being the aspect ratio of the hole [1]."
    )
    angle_degrees: Real = Field(default=0.0, description="Direction along which the hole is short [degrees].")


class LaughlinConfig(Group):
    """Laughlin liquid at filling 1/exponent."""

    kind: Literal["laughlin"] = Field(description="Kind of the state.")
    exponent: Annotated[int, WholeNumber(1, 12)] = Field(
        description="Exponent of the pair factor: odd for fermions, even for bosons, 1: filled level [1]."
    )
    electrons: Electrons = Field(description="Number of particles [1].")
    metric: MetricConfig = Field(default=MetricConfig(), description="Hole metric the state is sampled in.")
    conjugate: StrictBool = Field(default=False, description=_CONJUGATE)

    @field_validator("conjugate")
    @classmethod
    def _fermions_below_filling_one(cls, conjugate: bool, info: ValidationInfo) -> bool:
        exponent = info.data.get("exponent", 3)
        if conjugate and (exponent % 2 == 0 or exponent == 1):
            raise rule(
                "a conjugate exists for fermions below filling 1 only, that is for odd exponents from 3, "
                f"not for {exponent}; must be false here"
            )
        return conjugate


class MooreReadConfig(Group):
    """Moore-Read liquid: a Pfaffian of pairs times a Laughlin factor."""

    kind: Literal["moore_read"] = Field(description="Kind of the state.")
    filling: Annotated[Fraction, OneOfFractions(("1/2", "1"))] = Field(
        description="Filling of the level: 1/2 for fermions, 1 for bosons [1]."
    )
    electrons: Annotated[int, WholeNumber(2, multiple_of=2)] = Field(
        description="Number of particles, even [1]."
    )
    sector: Annotated[Literal["all", 1, 2, 3], NotBool] = Field(
        default="all", description="Which of the three Pfaffians of the torus, or all in turn."
    )
    metric: MetricConfig = Field(default=MetricConfig(), description="Hole metric the state is sampled in.")
    conjugate: StrictBool = Field(default=False, description=_CONJUGATE)

    @field_validator("conjugate")
    @classmethod
    def _fermions_below_filling_one(cls, conjugate: bool, info: ValidationInfo) -> bool:
        if conjugate and info.data.get("filling") == 1:
            raise rule(
                "a conjugate exists for fermions below filling 1 only, not for bosons; must be false here"
            )
        return conjugate


Point = Annotated[tuple[Annotated[int, WholeNumber()], Annotated[int, WholeNumber()]], ListOf(2)]


class FermiSeaConfig(Group):
    """Composite-fermion sea."""

    kind: Literal["fermi_sea"] = Field(description="Kind of the state.")
    filling: Annotated[Fraction, OneOfFractions(("1/2", "1/4"))] = Field(
        description="Filling of the level [1]."
    )
    electrons: Electrons = Field(description="Number of particles [1].")
    points: Annotated[tuple[Point, ...], ListOf()] | None = Field(
        default=None,
        description="Occupied lattice points [p, s], one per particle, all different; null: a compact sea is "
        "chosen [1].",
    )
    metric: MetricConfig = Field(default=MetricConfig(), description="Hole metric the state is sampled in.")
    conjugate: StrictBool = Field(default=False, description=_CONJUGATE)

    @field_validator("points")
    @classmethod
    def _one_per_electron(
        cls, points: tuple[tuple[int, int], ...] | None, info: ValidationInfo
    ) -> tuple[tuple[int, int], ...] | None:
        if points is None:
            return None
        electrons = info.data.get("electrons", len(points))
        repeated = sorted({point for point in points if points.count(point) > 1})
        if repeated:
            raise rule(f"points must all be different, but {list(repeated[0])} is given more than once")
        if len(points) != electrons:
            raise rule(f"must hold one point per particle, {electrons} in all, not {len(points)}")
        return points


StateConfig = Annotated[LaughlinConfig | MooreReadConfig | FermiSeaConfig, Field(discriminator="kind")]
