"""Lengths of an interaction in nm: NAME_nm for every key NAME in l_B, NAME_per_nm for every one in 1/l_B."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from typing import TYPE_CHECKING, Any

from mcgeo.runs.config_faults import Remark
from mcgeo.runs.yaml_source import Path

if TYPE_CHECKING:
    from mcgeo.problem.material import Sample

# The lengths of these lie across the plane, where another permittivity counts.
LAYERED_KINDS = ("one_gate", "two_gates", "square_well", "fang_howard", "gaussian_well")

_PER_NM, _NM = "_per_nm", "_nm"
_ENDINGS = {"[l_B].": _NM, "[1/l_B].": _PER_NM}


def _without_ending(key: object) -> str | None:
    """NAME of NAME_nm or NAME_per_nm."""
    for ending in (_PER_NM, _NM):
        if isinstance(key, str) and key.endswith(ending):
            return key.removesuffix(ending)
    return None


def in_magnetic_lengths(keys: Any, sample: Sample) -> Any:
    """The same keys at any depth, with numbers in l_B in place of those in nm; what is given in both is left."""
    if isinstance(keys, list | tuple):
        return [in_magnetic_lengths(value, sample) for value in keys]
    if not isinstance(keys, Mapping):
        return keys
    unit = sample.across_nm if keys.get("kind") in LAYERED_KINDS else sample.magnetic_length_nm
    result = {}
    for key, value in keys.items():
        name = _without_ending(key)
        if name is None or name in keys or not isinstance(value, int | float) or isinstance(value, bool):
            result[key] = in_magnetic_lengths(value, sample)
        else:
            result[name] = value * unit if key.endswith(_PER_NM) else value / unit
    return result


def length_remarks(given: Mapping[str, Any]) -> Iterator[Remark]:
    """Why lengths in nm have been left in keys of a configuration."""
    problem = given.get("problem")
    if isinstance(problem, Mapping):
        yield from _left_in_nm(problem.get("interaction"), ("problem", "interaction"))


def _left_in_nm(keys: object, path: Path) -> Iterator[Remark]:
    if isinstance(keys, list | tuple):
        for position, value in enumerate(keys):
            yield from _left_in_nm(value, (*path, position))
    if not isinstance(keys, Mapping):
        return
    for key, value in keys.items():
        name = _without_ending(key)
        if name is None:
            yield from _left_in_nm(value, (*path, key))
        elif name in keys:
            yield Remark((*path, key), f"does not go with {name}; remove one of them", at_key=True)
        else:
            message = "needs the magnetic length: give material with field_tesla or density_per_cm2"
            yield Remark((*path, key), message, at_key=True)


def without_repeats(remarks: Iterable[Remark], across: Sequence[Remark]) -> list[Remark]:
    """The remarks without those that a length left in nm brings with it: that NAME_nm is unknown, and NAME missing."""
    left = {remark.path for remark in across if remark.path and _without_ending(remark.path[-1]) is not None}
    names = {(*path[:-1], _without_ending(path[-1])) for path in left}
    return [remark for remark in remarks if remark.path not in left and remark.path not in names]


def with_lengths_in_nm(schema: dict[str, Any]) -> dict[str, Any]:
    """JSON schema in which interactions also have their lengths in nm."""
    for model in schema["$defs"].values():
        properties = model.get("properties", {})
        if "kind" not in properties:
            continue
        for key, value in list(properties.items()):
            description = value.get("description", "")
            for unit, ending in _ENDINGS.items():
                if description.endswith(unit):
                    words = f"{description.removesuffix(unit).strip()}, in place of {key}, with a material {unit}"
                    properties[key + ending] = {**value, "description": words.replace("l_B", "nm")}
                    model["required"] = [name for name in model["required"] if name != key]
    return schema
