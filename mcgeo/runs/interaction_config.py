"""Keys of ``problem.interaction``. A new interaction is one model here and one entry in `InteractionConfig`."""

from __future__ import annotations

import re
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BeforeValidator, Field

from mcgeo.runs.config_types import Group, ListOf, Positive, Real, rule
from mcgeo.runs.state_config import MetricConfig
from mcgeo.runs.table_file import ReadTable, TableFile

LARGEST_MOMENTUM = 15

NonNegative = Annotated[Real, Field(ge=0.0)]


class DielectricConfig(Group):
    """Dielectric whose in-plane permittivity has two values."""

    ratio: Positive = Field(
        description="e^(2Q) of g in V = 1/sqrt(r.g.r) along the first axis: the permittivity along the second axis "
        "over that along the first. The energy unit has the permittivity sqrt(eps_z sqrt(eps_1 eps_2)) [1]."
    )
    angle_degrees: Real = Field(default=0.0, description="Direction of the first axis [degrees].")


class CoulombConfig(Group):
    """V(r) = 1/sqrt(r.g.r), 1/r in an isotropic dielectric."""

    kind: Literal["coulomb"] = Field(description="Kind of the interaction.")
    dielectric: DielectricConfig = Field(
        default=DielectricConfig(ratio=1.0), description="Anisotropy of the permittivity in the plane."
    )


class GaussianConfig(Group):
    """V(q) = 2 pi exp(-q^2 range^2/2)."""

    kind: Literal["gaussian"] = Field(description="Kind of the interaction.")
    range: Positive = Field(description="Range of the interaction [l_B].")


class YukawaConfig(Group):
    """V(r) = exp(-screening r)/r."""

    kind: Literal["yukawa"] = Field(description="Kind of the interaction.")
    screening: NonNegative = Field(description="Screening wavenumber; 0: Coulomb [1/l_B].")


class OneGateConfig(Group):
    """Coulomb interaction screened by one metal gate: V(q) = (2 pi/q) (1 - exp(-2 q distance))."""

    kind: Literal["one_gate"] = Field(description="Kind of the interaction.")
    distance: Positive = Field(description="Distance from the electrons to the gate [l_B].")


class TwoGatesConfig(Group):
    """Coulomb interaction halfway between two metal gates: V(q) = (2 pi/q) tanh(q distance)."""

    kind: Literal["two_gates"] = Field(description="Kind of the interaction.")
    distance: Positive = Field(description="Distance from the electrons to either gate [l_B].")


class SquareWellConfig(Group):
    """Coulomb interaction in the lowest state of an infinitely deep square well."""

    kind: Literal["square_well"] = Field(description="Kind of the interaction.")
    width: NonNegative = Field(description="Width of the well; 0: Coulomb [l_B].")


class FangHowardConfig(Group):
    """Coulomb interaction at a heterojunction, density z^2 exp(-parameter z)."""

    kind: Literal["fang_howard"] = Field(description="Kind of the interaction.")
    parameter: Positive = Field(description="Parameter b; the mean distance to the interface is 3/b [1/l_B].")


class GaussianWellConfig(Group):
    """Coulomb interaction in a layer of Gaussian density."""

    kind: Literal["gaussian_well"] = Field(description="Kind of the interaction.")
    width: NonNegative = Field(description="Standard deviation of the density across the layer; 0: Coulomb [l_B].")


class SoftenedConfig(Group):
    """V(r) = 1/sqrt(r^2 + distance^2)."""

    kind: Literal["softened"] = Field(description="Kind of the interaction.")
    distance: NonNegative = Field(description="Distance below which V levels off; 0: Coulomb [l_B].")


class PowerLawConfig(Group):
    """V(r) = 1/r^exponent."""

    kind: Literal["power_law"] = Field(description="Kind of the interaction.")
    exponent: Annotated[Real, Field(gt=0.0, lt=2.0)] = Field(description="Exponent; 1: Coulomb [1].")


class DipoleConfig(Group):
    """Parallel dipoles in a layer of Gaussian density, strength (1 - 3 cos^2)/r^3 in space."""

    kind: Literal["dipole"] = Field(description="Kind of the interaction.")
    thickness: Positive = Field(description="Standard deviation of the density across the layer [l_B].")
    tilt_degrees: Annotated[Real, Field(ge=0.0, le=90.0)] = Field(
        default=0.0, description="Angle between the dipoles and the normal of the layer [degrees]."
    )
    direction_degrees: Real = Field(
        default=0.0, description="Direction in the plane to which the dipoles lean [degrees]."
    )
    strength: Real = Field(default=1.0, description="Strength [e^2 l_B^2/(4 pi eps)].")


def _keys_as_text(values: object) -> object:
    if isinstance(values, dict):
        return {str(key) if type(key) is int else key: value for key, value in values.items()}
    return values


def _momentum(key: str) -> str:
    if not re.fullmatch("0|[1-9][0-9]?", key) or int(key) > LARGEST_MOMENTUM:
        raise rule(
            f"a key must be a relative angular momentum, a whole number from 0 to {LARGEST_MOMENTUM}, not {key!r}"
        )
    return key


def _not_empty(values: dict[str, Any]) -> dict[str, Any]:
    if not values:
        raise rule("must hold at least one value, as in {1: 1.0}")
    return values


class PseudopotentialsConfig(Group):
    """Guiding centres of relative angular momentum m pay values[m]."""

    kind: Literal["pseudopotentials"] = Field(description="Kind of the interaction.")
    values: Annotated[
        dict[Annotated[str, AfterValidator(_momentum)], Real],
        BeforeValidator(_keys_as_text),
        AfterValidator(_not_empty),
    ] = Field(description="Energy of each relative angular momentum, as in {1: 1.0, 3: 0.2} [e^2/(4 pi eps l_B)].")
    metric: MetricConfig = Field(default=MetricConfig(), description="Metric in which angular momentum is counted.")


class TableConfig(Group):
    """V(q) from a file of comma-separated numbers."""

    kind: Literal["table"] = Field(description="Kind of the interaction.")
    file: Annotated[TableFile, ReadTable()] = Field(
        description="File inside the folder of the configuration, with the columns q and V, or q_x, q_y and V."
    )


class TermConfig(Group):
    """One term of a sum."""

    weight: Real = Field(description="Factor of the interaction [1].")
    interaction: InteractionConfig = Field(description="Interaction of any kind.")


def _one_or_more(terms: tuple[TermConfig, ...]) -> tuple[TermConfig, ...]:
    if not terms:
        raise rule("must hold at least one term, as in [{weight: 1.0, interaction: {kind: coulomb}}]")
    return terms


class SumConfig(Group):
    """Weighted sum of interactions."""

    kind: Literal["sum"] = Field(description="Kind of the interaction.")
    terms: Annotated[tuple[TermConfig, ...], ListOf(), AfterValidator(_one_or_more)] = Field(
        description="Interactions with their weights [1]."
    )


InteractionConfig = Annotated[
    CoulombConfig
    | GaussianConfig
    | YukawaConfig
    | OneGateConfig
    | TwoGatesConfig
    | SquareWellConfig
    | FangHowardConfig
    | GaussianWellConfig
    | SoftenedConfig
    | PowerLawConfig
    | DipoleConfig
    | PseudopotentialsConfig
    | TableConfig
    | SumConfig,
    Field(discriminator="kind"),
]

TermConfig.model_rebuild()
