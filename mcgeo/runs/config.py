"""The configuration of a run: one YAML file in, immutable and validated groups of keys out."""

from __future__ import annotations

import os
from collections.abc import Iterable, Mapping
from functools import cache
from pathlib import Path
from typing import Any

from pydantic import Field, ValidationError, ValidationInfo, field_validator, model_validator
from pydantic_core import PydanticCustomError

from mcgeo.errors import ConfigError, GeometryError
from mcgeo.runs.config_faults import Remark, explain, show
from mcgeo.runs.config_types import Group
from mcgeo.runs.geometry_config import CellConfig, GeometryConfig, NamedCellConfig
from mcgeo.runs.lengths import length_remarks, with_lengths_in_nm, without_repeats
from mcgeo.runs.material_config import MaterialConfig
from mcgeo.runs.named_files import FILES, NamedFiles
from mcgeo.runs.problem_config import ProblemConfig, ScanConfig
from mcgeo.runs.sampling_config import SamplingConfig
from mcgeo.runs.sizes import size_remarks
from mcgeo.runs.state_config import SAMPLING_SECTIONS, StateConfig, catalogue_remarks, with_kind
from mcgeo.runs.sweep_config import SweepConfig
from mcgeo.runs.tilt_config import tilt_remarks
from mcgeo.runs.yaml_source import Fault, dotted, fault_lines, parse_yaml

# Keys of ``sampling`` that say how a run is done and change none of its results.
UNRELATED_TO_RESULTS = ("threads", "checkpoint_seconds")


class Config(Group):
    """Everything a run is told."""

    state: StateConfig = Field(description="Liquid that is sampled.")
    geometry: GeometryConfig = Field(default=GeometryConfig(), description="Surface the particles live on.")
    cell: CellConfig | None = Field(
        default=None,
        description="Cell of the torus, by its shape or by tau; null: hexagonal, or none on the disk.",
    )
    sampling: SamplingConfig = Field(default=SamplingConfig(), description="How the walkers run.")
    material: MaterialConfig | None = Field(
        default=None, description="Material and field: fill in the problem, and give results in physical units."
    )
    problem: ProblemConfig = Field(default=ProblemConfig(), description="Mass, interaction and level.")
    scan: ScanConfig = Field(
        default=ScanConfig(), description="Hole metrics at which the energy is tabulated."
    )
    # What a run is told holds for one point: the grid is no part of it and is left out when it is written.
    sweep: SweepConfig | None = Field(
        default=None, exclude=True, description="Grid of many configurations; null: this one alone."
    )

    @model_validator(mode="before")
    @classmethod
    def _with_material(cls, given: Any, info: ValidationInfo) -> Any:
        return with_material(given, info.context)

    @field_validator("state", mode="before")
    @classmethod
    def _kind_of_catalogue(cls, state: Any) -> Any:
        return with_kind(state)

    @field_validator("cell")
    @classmethod
    def _hexagonal_torus(cls, cell: CellConfig | None, info: ValidationInfo) -> CellConfig | None:
        geometry = info.data.get("geometry")
        if cell is None and geometry is not None and geometry.kind == "torus":
            return NamedCellConfig(shape="hexagonal")
        return cell

    @model_validator(mode="after")
    def _fits_together(self) -> Config:
        remarks = contradictions(self.model_dump(exclude_unset=True))
        if remarks:
            listed = "; ".join(f"{dotted(remark.path)}: {remark.message}" for remark in remarks)
            raise PydanticCustomError("contradiction", "{listed}", {"listed": listed})
        return self


def contradictions(given: Mapping[str, Any]) -> list[Remark]:
    """What of the given keys does not go together across groups, be the rest valid or not.

    Parameters
    ----------
    given : mapping
        With what a material adds, see `with_material`.
    """
    remarks = [
        *_disk_remarks(given), *catalogue_remarks(given), *size_remarks(given), *_target_remarks(given),
        *length_remarks(given), *tilt_remarks(given),
    ]  # fmt: skip
    if given.get("material") is not None:
        from mcgeo.runs.material_problem import material_remarks

        remarks += material_remarks(given)
    return remarks


def with_material(given: Any, context: Mapping[str, Any] | None) -> Any:
    """The given keys with what a material adds to them, as `material_problem` says.

    Numerical libraries, slow to load, are needed by a material only.
    """
    if not isinstance(given, Mapping) or given.get("material") is None:
        return given
    from mcgeo.runs.material_problem import filled

    return filled(given, context)


def _disk_remarks(given: Mapping[str, Any]) -> list[Remark]:
    state, geometry = (
        given[key] if isinstance(given.get(key), Mapping) else {} for key in ("state", "geometry")
    )
    if geometry.get("kind") != "disk":
        return []
    remarks = []
    if given.get("cell") is not None:
        remarks.append(
            Remark(("cell",), "a disk has no cell; remove it, or use the geometry torus", at_key=True)
        )
    if state.get("kind") == "fermi_sea":
        remarks.append(Remark(("state", "kind"), "must be laughlin or moore_read on a disk, not fermi_sea"))
    if state.get("conjugate") is True:
        remarks.append(
            Remark(("state", "conjugate"), "must be false on a disk; the conjugate needs the torus")
        )
    if state.get("kind") == "moore_read" and "sector" in state:
        remarks.append(Remark(("state", "sector"), "a disk has no sectors; remove it", at_key=True))
    return remarks


def _target_remarks(given: Mapping[str, Any]) -> list[Remark]:
    sampling, scan = (given[key] if isinstance(given.get(key), Mapping) else {} for key in ("sampling", "scan"))
    if sampling.get("target_quantity") != "stretch" or scan.get("road") != "torus":
        return []
    message = "must be energy on the torus road, where each metric is sampled by itself and none has an optimum"
    return [Remark(("sampling", "target_quantity"), message)]


def load_config(path: str | os.PathLike[str], *, allow_outside: bool = False) -> Config:
    """Read and validate a YAML file; with ``allow_outside`` the files it names may lie outside its folder.

    Raises
    ------
    ConfigError
        With every fault, one line ``file:line:column: key.path: what is wrong, what is allowed`` each, in the
        order of the file.
    """
    source, faults = parse_yaml(path)
    if source.data.get("sweep") is not None:
        fault = Fault(source.locate(("sweep",), at_key=True), ("sweep",), "makes many runs of this; use mcgeo sweep")
        raise ConfigError([fault.line(source.path)])
    config, remarks = validated(source.data, NamedFiles(Path(path).parent, allow_outside))
    faults += [Fault(source.locate(r.path, at_key=r.at_key), r.path, r.message) for r in remarks]
    if config is None or faults:
        raise ConfigError(fault_lines(faults, source.path))
    return config


def validated(data: Mapping[str, Any], files: NamedFiles | None) -> tuple[Config | None, list[Remark]]:
    """The configuration of plain data, or None and what is wrong with them.

    Parameters
    ----------
    files : NamedFiles or None
        Where files named in the configuration may lie; None where none may be read.
    """
    context = {FILES: files}
    try:
        try:
            return Config.model_validate(data, context=context), []
        except ValidationError as error:
            # The model looks for contradictions only when all groups are valid; here they are wanted in any case.
            across = contradictions(with_material(data, context)) if isinstance(data, Mapping) else []
            return None, without_repeats(explain(error, _schema()), across) + across
    except GeometryError as error:
        return None, [Remark(("material",), str(error), at_key=True)]
    except ArithmeticError:
        # Only units are computed with here.
        return None, [Remark(("material",), "masses, permittivity or field are too large or too small", at_key=True)]


def resolved(config: Config) -> dict[str, Any]:
    """The configuration as plain JSON-able data, every default filled in and fractions as text.

    On the disk the keys that only a torus has are left out, for a liquid of the catalogue those of a sampling.
    """
    data = config.model_dump(mode="json", by_alias=True)
    if config.state.kind == "catalogue":
        for key in SAMPLING_SECTIONS:
            del data[key]
    if config.geometry.kind == "disk":
        del data["cell"]
        data["state"].pop("sector", None)
    return data


def config_from_resolved(data: Mapping[str, Any]) -> Config:
    """The configuration of which `resolved` gave ``data``; it names no files that are still to be read.

    Raises
    ------
    ConfigError
        With one line ``key.path: what is wrong`` per fault, if the data are not of a valid configuration.
    """
    config, remarks = validated(data, None)
    if config is None:
        raise ConfigError(
            [f"{dotted(remark.path) or 'configuration'}: {remark.message}" for remark in remarks]
        )
    return config


def state_identity(config: Config) -> dict[str, Any]:
    """The part of the resolved configuration that determines a sampling: state, geometry, cell and sampling.

    Keys that results do not depend on are left out.
    """
    data = resolved(config)
    identity: dict[str, Any] = {
        key: data[key] for key in ("state", *SAMPLING_SECTIONS) if key in data
    }
    for key in UNRELATED_TO_RESULTS:
        identity.get("sampling", {}).pop(key, None)
    return identity


def differing_keys(
    resolved_a: Mapping[str, Any], resolved_b: Mapping[str, Any], sections: Iterable[str]
) -> list[str]:
    """Keys of the given top-level groups with different values, as ``sampling.walkers: 32 and 64``."""
    lines = []
    for section in sections:
        a, b = (
            _leaves(data[section], section) if section in data else {} for data in (resolved_a, resolved_b)
        )
        for key in dict.fromkeys([*a, *b]):
            first, second = (show(leaves[key]) if key in leaves else "not given" for leaves in (a, b))
            if a.get(key) != b.get(key) or (key in a) != (key in b):
                lines.append(f"{key}: {first} and {second}")
    return lines


def _leaves(value: Any, name: str) -> dict[str, Any]:
    if not isinstance(value, Mapping):
        return {name: value}
    return {key: leaf for child in value for key, leaf in _leaves(value[child], f"{name}.{child}").items()}


@cache
def _schema() -> dict[str, Any]:
    """Made once: points of a sweep may have many faults."""
    return json_schema()


def json_schema() -> dict[str, Any]:
    """JSON schema of the YAML file, for editors."""
    schema = with_lengths_in_nm(Config.model_json_schema(by_alias=True))
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", **schema}
