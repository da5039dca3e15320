"""Tables of named materials: that of the package, and users' own files of the same form."""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache
from pathlib import Path
from typing import Annotated, Any

from pydantic import Discriminator, Field, Tag, ValidationError

import mcgeo.problem
from mcgeo.errors import ConfigError
from mcgeo.runs.config_faults import explain
from mcgeo.runs.config_types import Group, ListOf, Positive, Real, given_key, rule
from mcgeo.runs.problem_config import MassAxesConfig, MassTensorConfig
from mcgeo.runs.yaml_source import Fault, fault_lines, parse_yaml

_SHIPPED = Path(mcgeo.problem.__file__).with_name("materials.yaml")


class PermittivityConfig(Group):
    """Permittivity with different values along three axes."""

    in_plane: Annotated[tuple[Positive, Positive], ListOf(2)] = Field(
        description="Relative permittivities along the first and the second axis of the plane [1]."
    )
    across: Positive = Field(description="Relative permittivity across the plane [1].")
    angle_degrees: Real = Field(default=0.0, description="Direction of the first axis [degrees].")


def _form(value: object) -> str:
    return "MassTensorConfig" if given_key(value, "tensor") else "MassAxesConfig"


MaterialMass = Annotated[
    Annotated[MassAxesConfig, Tag("MassAxesConfig")] | Annotated[MassTensorConfig, Tag("MassTensorConfig")],
    Discriminator(_form),
]


class MaterialNumbers(Group):
    """What a material is to electrons of a plane."""

    mass: MaterialMass | None = Field(default=None, description="Effective mass in the plane, in one of two ways.")
    mass_across: Positive | None = Field(
        default=None, description="Effective mass across the plane [free-electron masses]."
    )
    permittivity: Positive | None = Field(default=None, description="Relative permittivity, the same everywhere [1].")
    permittivity_tensor: PermittivityConfig | None = Field(
        default=None, description="Relative permittivity along three axes, instead of permittivity."
    )


class MaterialEntry(MaterialNumbers):
    """A named material of a table."""

    mass: MaterialMass = Field(description="Effective mass in the plane, in one of two ways.")
    description: str | None = Field(default=None, description="What it is.")
    mass_source: str | None = Field(default=None, description="Where the masses come from.")
    permittivity_source: str | None = Field(default=None, description="Where the permittivity comes from.")


def read_materials(path: Path) -> dict[str, dict[str, Any]]:
    """Materials of a file by name, each as valid keys of `MaterialEntry` without those not given.

    Raises
    ------
    ConfigError
        With one line per fault.
    """
    source, faults = parse_yaml(path)
    schema = MaterialEntry.model_json_schema()
    entries = {}
    for name, keys in source.data.items():
        try:
            entries[name] = MaterialEntry.model_validate(keys).model_dump(exclude_none=True)
        except ValidationError as error:
            remarks = explain(error, schema)
            paths = [(name, *remark.path) for remark in remarks]
            faults += [
                Fault(source.locate(at, at_key=remark.at_key), at, remark.message)
                for at, remark in zip(paths, remarks, strict=True)
            ]
            continue
        if ("permittivity" in entries[name]) == ("permittivity_tensor" in entries[name]):
            message = "needs one of permittivity and permittivity_tensor"
            faults.append(Fault(source.locate((name,), at_key=True), (name,), message))
    if faults:
        raise ConfigError(fault_lines(faults, source.path))
    return entries


@lru_cache(maxsize=1)
def shipped_materials() -> Mapping[str, dict[str, Any]]:
    """The table of the package."""
    return read_materials(_SHIPPED)


def named_material(name: str, file: Path | None) -> dict[str, Any]:
    """Numbers of a named material: keys of `MaterialNumbers`; raises the error of a validator if there is none."""
    try:
        table = shipped_materials() if file is None else read_materials(file)
    except ConfigError as error:
        raise rule("; ".join(error.faults)) from None
    if name not in table:
        raise rule(f"must be one of {', '.join(table)}, not {name!r}; or give mass and permittivity")
    return {key: value for key, value in table[name].items() if key in MaterialNumbers.model_fields}
