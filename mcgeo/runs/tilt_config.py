"""Keys of ``problem.tilt``: a field tilted out of the normal, and the parabolic well it acts in."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any

from pydantic import Field

from mcgeo.runs.config_faults import Remark
from mcgeo.runs.config_types import Group, Positive, Real, WholeNumber

_TILT = ("problem", "tilt")


class TiltConfig(Group):
    """Tilted field and well."""

    angle_degrees: Annotated[Real, Field(ge=0.0, le=85.0)] = Field(
        description="Angle between the field and the normal of the plane [degrees]."
    )
    direction_degrees: Real = Field(
        default=0.0, description="Direction in the plane to which the field leans [degrees]."
    )
    confinement_ratio: Positive | None = Field(
        default=None,
        description="Energy of the well's oscillator over the cyclotron energy of the component across the plane [1].",
    )
    confinement_mev: Positive | None = Field(
        default=None, description="Energy of the well's oscillator, instead, with the field of a material [meV]."
    )
    subband: Annotated[int, WholeNumber(0, 2)] = Field(
        default=0, description="State of the well's oscillator, counted from 0 [1]."
    )
    mass_across_ratio: Positive | None = Field(
        default=None,
        description="Mass across the plane over the cyclotron mass; null: the material's, or 1 [1].",
    )
    permittivity_across_ratio: Positive | None = Field(
        default=None,
        description="Permittivity across the plane over its mean in the plane; null: the material's, or 1 [1].",
    )


def tilt_remarks(given: Mapping[str, Any]) -> Iterator[Remark]:
    """What does not go with a tilted field, of keys filled in from the material, be the rest valid or not."""
    problem = given.get("problem")
    tilt = problem.get("tilt") if isinstance(problem, Mapping) else None
    if not isinstance(problem, Mapping) or not isinstance(tilt, Mapping):
        return
    ratio, energy = tilt.get("confinement_ratio"), tilt.get("confinement_mev")
    if ratio is None and energy is None:
        message = "missing; must be a finite number above 0, unless confinement_mev is given instead"
        yield Remark((*_TILT, "confinement_ratio"), message, at_key=True)
    elif ratio is None:
        message = "needs the cyclotron energy: give material with field_tesla or density_per_cm2, or confinement_ratio"
        yield Remark((*_TILT, "confinement_mev"), message, at_key=True)
    interaction = problem.get("interaction", {})
    kind = interaction.get("kind", "coulomb") if isinstance(interaction, Mapping) else "coulomb"
    if kind != "coulomb":
        yield Remark(("problem", "interaction", "kind"), f"must be coulomb in a tilted field, not {kind}")
    if (variation := problem.get("variation", "projected")) != "projected":
        yield Remark(("problem", "variation"), f"must be projected in a tilted field, not {variation}")
