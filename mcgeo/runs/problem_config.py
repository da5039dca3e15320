"""Keys of ``problem`` and ``scan``: mass, interaction, level, and the metrics that are tried."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import AfterValidator, Discriminator, Field, Tag, ValidationInfo, field_validator

from mcgeo.runs.config_types import Group, ListOf, Positive, Real, WholeNumber, given_key, rule
from mcgeo.runs.interaction_config import CoulombConfig, InteractionConfig
from mcgeo.runs.tilt_config import TiltConfig

Row = Annotated[tuple[Real, Real], ListOf(2)]
Tensor = tuple[tuple[float, float], tuple[float, float]]


def _symmetric_positive(tensor: Tensor) -> Tensor:
    (xx, xy), (yx, yy) = tensor
    if abs(xy - yx) > 1e-9 * max(abs(xy), abs(yx)):
        raise rule(
            f"must be symmetric, [[xx, xy], [xy, yy]], but the entries beside the diagonal are {xy} and {yx}"
        )
    scale = max(abs(xx), abs(yy), abs(xy)) or 1.0
    # Scaled, so that masses in any unit neither overflow nor vanish when multiplied.
    determinant = (xx / scale) * (yy / scale) - (xy / scale) * (yx / scale)
    if not (xx > 0.0 and yy > 0.0 and determinant > 0.0):
        raise rule(
            f"must be positive definite: xx > 0, yy > 0 and xx yy > xy^2, not {[list(row) for row in tensor]}"
        )
    return tensor


class MassRatioConfig(Group):
    """Mass by the ratio of its two values."""

    ratio: Positive = Field(description="Mass along the first axis over that along the second [1].")
    angle_degrees: Real = Field(default=0.0, description="Direction of the first axis [degrees].")


class MassAxesConfig(Group):
    """Mass by its two values."""

    along_axes: Annotated[tuple[Positive, Positive], ListOf(2)] = Field(
        description="Masses along the first and the second axis [free-electron masses]."
    )
    angle_degrees: Real = Field(default=0.0, description="Direction of the first axis [degrees].")


class MassTensorConfig(Group):
    """Mass by its tensor."""

    tensor: Annotated[tuple[Row, Row], ListOf(2), AfterValidator(_symmetric_positive)] = Field(
        description="[[xx, xy], [xy, yy]], symmetric and positive definite [free-electron masses]."
    )


def _form(value: object) -> str:
    if given_key(value, "tensor"):
        return "MassTensorConfig"
    return "MassAxesConfig" if given_key(value, "along_axes") else "MassRatioConfig"


# The tags are the names of the models, by which the JSON schema lists them.
MassConfig = Annotated[
    Annotated[MassRatioConfig, Tag("MassRatioConfig")]
    | Annotated[MassAxesConfig, Tag("MassAxesConfig")]
    | Annotated[MassTensorConfig, Tag("MassTensorConfig")],
    Discriminator(_form),
]


class ProblemConfig(Group):
    """The electrons whose liquid is looked for."""

    mass: MassConfig = Field(
        default=MassRatioConfig(ratio=1.0), description="Effective mass, in one of three ways."
    )
    interaction: InteractionConfig = Field(
        default=CoulombConfig(kind="coulomb"), description="Interaction of two electrons."
    )
    level: Annotated[int, WholeNumber(0, 2)] = Field(
        default=0, description="Landau level, counted from 0 [1]."
    )
    tilt: TiltConfig | None = Field(default=None, description="Tilted field and parabolic well; null: a thin layer.")


    variation: Literal["projected", "rigid", "two_metric"] = Field(
        default="projected",
        description="What varies: the hole (orbits follow the mass), hole and orbits as one, or both apart.",
    )
    level_mixing: Positive | None = Field(
        default=None,
        validate_default=True,
        description="Coulomb energy over cyclotron energy, for rigid and two_metric [1].",
    )

    @field_validator("level_mixing")
    @classmethod
    def _kinetic_energy_known(cls, level_mixing: float | None, info: ValidationInfo) -> float | None:
        kind = info.data.get("variation", "projected")
        if level_mixing is None and kind != "projected":
            raise rule(f"must be given for the variation {kind}: a positive number, Coulomb over cyclotron energy")
        return level_mixing


class StretchRangeConfig(Group):
    """Equally spaced stretches."""

    from_: Annotated[Real, Field(ge=-6.0, le=6.0)] = Field(
        default=0.0, alias="from", description="First stretch Q [1]."
    )
    to: Annotated[Real, Field(ge=-6.0, le=6.0)] = Field(default=2.0, description="Last stretch Q [1].")
    points: Annotated[int, WholeNumber(3, 10_000)] = Field(
        default=41, description="Number of stretches, both ends counted [1]."
    )

    @field_validator("to")
    @classmethod
    def _ascending(cls, to: float, info: ValidationInfo) -> float:
        if to <= (start := info.data.get("from_", -float("inf"))):
            raise rule(f"must be above from, which is {start:g}, but is {to:g}")
        return to


class ScanConfig(Group):
    """Hole metrics at which the energy is tabulated."""

    stretch: StretchRangeConfig = Field(
        default=StretchRangeConfig(), description="Stretches of the hole metric."
    )
    angle_degrees: Real | None = Field(
        default=None, description="Angle of the hole metric; null: that of the optimum [degrees]."
    )
    road: Literal["plane", "torus"] = Field(
        default="plane",
        description="Energies of the infinite liquid from pair occupations, or of the cell with every metric sampled.",
    )
