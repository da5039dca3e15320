"""Keys of ``geometry`` and ``cell``: where the particles live."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Discriminator, Field, Tag

from mcgeo.runs.config_types import Group, ListOf, Positive, Real, given_key


class GeometryConfig(Group):
    """Surface the particles live on."""

    kind: Literal["torus", "disk"] = Field(
        default="torus", description="Torus with periodic sides, or a droplet."
    )


class NamedCellConfig(Group):
    """Cell of the torus by its name."""

    shape: Literal["hexagonal", "square"] = Field(description="Shape of the cell.")


class ModulusCellConfig(Group):
    """Cell of the torus by its modulus."""

    tau: Annotated[tuple[Real, Positive], ListOf(2)] = Field(
        description="Real and imaginary part of the modulus tau = L2/L1, the imaginary part positive [1]."
    )


def _form(value: object) -> str:
    return "ModulusCellConfig" if given_key(value, "tau") else "NamedCellConfig"


# The tags are the names of the models, by which the JSON schema lists them.
CellConfig = Annotated[
    Annotated[NamedCellConfig, Tag("NamedCellConfig")]
    | Annotated[ModulusCellConfig, Tag("ModulusCellConfig")],
    Discriminator(_form),
]
