"""Keys of ``state``: which liquid is sampled. A new kind is one model here and one entry in `StateConfig`."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Mapping
from fractions import Fraction
from typing import Annotated, Any, Literal, get_args

from pydantic import Field, StrictBool, ValidationInfo, field_validator

from mcgeo.runs.config_faults import Remark
from mcgeo.runs.config_types import (
    MOST_ELECTRONS,
    Electrons,
    Group,
    ListOf,
    NotBool,
    OneOfFractions,
    Real,
    WholeNumber,
    rule,
)

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

    @property
    def filling(self) -> Fraction:
        """1/exponent."""
        return Fraction(1, self.exponent)


class MooreReadConfig(Group):
    """Moore-Read liquid: a Pfaffian of pairs times a Laughlin factor."""

    kind: Literal["moore_read"] = Field(description="Kind of the state.")
    filling: Annotated[Fraction, OneOfFractions(("1/2", "1"))] = Field(
        description="Filling of the level: 1/2 for fermions, 1 for bosons [1]."
    )
    electrons: Annotated[int, WholeNumber(2, MOST_ELECTRONS, multiple_of=2)] = Field(
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
        repeated = sorted(point for point, times in Counter(points).items() if times > 1)
        if repeated:
            raise rule(f"points must all be different, but {list(repeated[0])} is given more than once")
        if len(points) != electrons:
            raise rule(f"must hold one point per particle, {electrons} in all, not {len(points)}")
        return points


# What a configuration says of a sampling beside its state.
SAMPLING_SECTIONS = ("geometry", "cell", "sampling")

CatalogueName = Literal[
    "laughlin-1",
    "laughlin-1/3",
    "laughlin-1/5",
    "laughlin-1/7",
    "laughlin-1/2",
    "laughlin-1/4",
    "moore_read-1/2",
    "moore_read-1",
    "fermi_sea-1/2",
    "fermi_sea-1/4",
]
CATALOGUE_NAMES: tuple[str, ...] = get_args(CatalogueName)

# Of these no hole conjugate exists: bosons, and the filled level.
_WITHOUT_CONJUGATE = ("laughlin-1", "laughlin-1/2", "laughlin-1/4", "moore_read-1")


class CatalogueConfig(Group):
    """Liquid of the shipped catalogue: sampled already, in its own metric."""

    kind: Literal["catalogue"] = Field(
        default="catalogue", description="Kind of the state; goes without saying where a catalogue key is given."
    )
    catalogue: CatalogueName = Field(description="Entry of the catalogue: kind of the liquid and filling.")
    conjugate: StrictBool = Field(default=False, description=_CONJUGATE)

    @field_validator("conjugate")
    @classmethod
    def _fermions_below_filling_one(cls, conjugate: bool, info: ValidationInfo) -> bool:
        name = info.data.get("catalogue")
        if conjugate and name in _WITHOUT_CONJUGATE:
            raise rule(f"a conjugate exists for fermions below filling 1 only, not for {name}; must be false here")
        return conjugate

    @property
    def filling(self) -> Fraction:
        """Of the sampled liquid, as its name says."""
        return Fraction(self.catalogue.rpartition("-")[2])


def with_kind(state: Any) -> Any:
    """The given keys of ``state``, with the kind that a catalogue key implies."""
    if isinstance(state, Mapping) and "catalogue" in state and "kind" not in state:
        return {"kind": "catalogue", **state}
    return state


def catalogue_remarks(given: Mapping[str, Any]) -> Iterator[Remark]:
    """Keys of the sampling given beside a liquid that is sampled already, and what one liquid cannot answer."""
    state = given.get("state")
    if not isinstance(state, Mapping) or "catalogue" not in state or state.get("kind", "catalogue") != "catalogue":
        return
    for key in SAMPLING_SECTIONS:
        if given.get(key) is not None:
            yield Remark((key,), "a liquid of the catalogue is sampled already; remove it", at_key=True)
    scan = given.get("scan")
    if isinstance(scan, Mapping) and scan.get("road") == "torus":
        message = "must be plane for a liquid of the catalogue, because the torus road samples every metric"
        yield Remark(("scan", "road"), message)


StateConfig = Annotated[
    LaughlinConfig | MooreReadConfig | FermiSeaConfig | CatalogueConfig, Field(discriminator="kind")
]
