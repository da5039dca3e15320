"""Keys of ``material``: masses and permittivity, by name or by number, and the field."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Self

from pydantic import Field, ValidationInfo, field_validator, model_validator
from pydantic_core import PydanticCustomError

from mcgeo.runs.config_types import Positive, Real, rule
from mcgeo.runs.material_table import MaterialNumbers, PermittivityConfig, named_material
from mcgeo.runs.named_files import FILES, files_of

Keys = Mapping[str, Any]


class MaterialConfig(MaterialNumbers):
    """Material and field; numbers given beside a name replace those of the table."""

    file: str | None = Field(
        default=None, description="Table of materials inside the folder of the configuration; null: that of mcgeo."
    )
    name: str | None = Field(default=None, description="Name of the material in the table.")
    angle_degrees: Real = Field(default=0.0, description="Angle by which masses and permittivity are turned [degrees].")
    field_tesla: Positive | None = Field(default=None, description="Field, its component across the plane [T].")
    density_per_cm2: Positive | None = Field(
        default=None, description="Density of electrons, which with the filling gives the field [1/cm^2]."
    )

    @model_validator(mode="before")
    @classmethod
    def _numbers_of_the_name(cls, keys: Any, info: ValidationInfo) -> Any:
        if not isinstance(keys, Mapping):
            return keys
        try:
            return {**_looked_up(keys, info.context), **keys}
        except PydanticCustomError:
            # `_known` says it again, at its place.
            return keys

    @field_validator("file")
    @classmethod
    def _inside(cls, file: str | None, info: ValidationInfo) -> str | None:
        # In a result file the name is only where the numbers beside it came from.
        if file is not None and (info.context or {}).get(FILES, True) is not None:
            files_of(info.context).path(file)
        return file

    @field_validator("name")
    @classmethod
    def _known(cls, name: str | None, info: ValidationInfo) -> str | None:
        given = {key: value for key, value in info.data.items() if value is not None}
        if {"file", "mass", "permittivity", "permittivity_tensor"} <= set(info.data):
            _looked_up({**given, "name": name}, info.context)
        return name

    @field_validator("permittivity_tensor")
    @classmethod
    def _one_permittivity(cls, tensor: PermittivityConfig | None, info: ValidationInfo) -> PermittivityConfig | None:
        if tensor is not None and info.data.get("permittivity") is not None:
            raise rule("does not go with permittivity; remove one of them")
        return tensor

    @model_validator(mode="after")
    def _complete(self) -> Self:
        if self.mass is None or (self.permittivity is None and self.permittivity_tensor is None):
            raise rule("needs a name, or mass and permittivity (or permittivity_tensor)")
        return self


def _looked_up(keys: Keys, context: Keys | None) -> Keys:
    """Numbers of the table for what is not given."""
    name, file = keys.get("name"), keys.get("file")
    has_mass = keys.get("mass") is not None
    has_permittivity = any(keys.get(key) is not None for key in ("permittivity", "permittivity_tensor"))
    if not isinstance(name, str) or not isinstance(file, str | None) or (has_mass and has_permittivity):
        return {}
    found = named_material(name, None if file is None else files_of(context).path(file))
    given = [*(("mass", "mass_across") if has_mass else ())]
    given += ("permittivity", "permittivity_tensor") if has_permittivity else ()
    return {key: value for key, value in found.items() if key not in given}
