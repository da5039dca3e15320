"""From resolved keys of ``material`` to the material and the sample."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from mcgeo.problem.material import Material, Sample, tensor_along_axes

Keys = Mapping[str, Any]


def turned_mass(keys: Keys) -> dict[str, Any]:
    """Keys of ``problem.mass`` from resolved keys of ``material``."""
    mass, turn = keys["mass"], keys.get("angle_degrees", 0.0)
    if "tensor" in mass:
        (xx, xy), (_, yy) = mass["tensor"]
        mean, along, size = 0.5 * (xx + yy), 0.5 * math.atan2(2.0 * xy, xx - yy), math.hypot(0.5 * (xx - yy), xy)
        tensor = tensor_along_axes((mean + size, mean - size), along + math.radians(turn))
        return {"tensor": [list(row) for row in tensor]}
    return {"along_axes": list(mass["along_axes"]), "angle_degrees": mass.get("angle_degrees", 0.0) + turn}


def _tensor(mass: Keys) -> tuple[tuple[float, float], ...]:
    if "tensor" in mass:
        return tuple(tuple(row) for row in mass["tensor"])
    return tensor_along_axes(tuple(mass["along_axes"]), math.radians(mass["angle_degrees"]))


def material_of(keys: Keys) -> Material:
    """The material of resolved keys of ``material``.

    Raises
    ------
    GeometryError
        If the numbers are too large or too small to work with.
    """
    turn = math.radians(keys.get("angle_degrees", 0.0))
    tensor = keys.get("permittivity_tensor")
    if tensor is None:
        across = keys["permittivity"]
        in_plane = tensor_along_axes((across, across))
    else:
        across = tensor["across"]
        angle = math.radians(tensor.get("angle_degrees", 0.0)) + turn
        in_plane = tensor_along_axes(tuple(tensor["in_plane"]), angle)
    label = keys.get("name") or "masses and permittivity as given"
    return Material.of(label, _tensor(turned_mass(keys)), in_plane, across, keys.get("mass_across"))


def sample_of(resolved: Keys) -> Sample | None:
    """The sample of a resolved configuration, None where it has no material or no field."""
    keys = resolved.get("material")
    if keys is None or keys.get("field_tesla") is None:
        return None
    return Sample(material_of(keys), keys["field_tesla"])
