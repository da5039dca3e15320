"""What a material says of the problem: its mass, its dielectric, and numbers given in physical units.

A material fills in what of ``problem`` is not given: the mass, the dielectric of a Coulomb interaction, the level
mixing, the confinement of a tilted well, and lengths of the interaction given in nm. A resolved configuration holds
all of these as numbers; what is given twice must agree.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from typing import Any

from pydantic import TypeAdapter, ValidationError

from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.material import Material, Sample, density_of_field, field_of_density, tensor_along_axes
from mcgeo.runs.config_faults import Remark
from mcgeo.runs.lengths import LAYERED_KINDS, in_magnetic_lengths
from mcgeo.runs.material_config import MaterialConfig
from mcgeo.runs.material_sample import material_of, turned_mass
from mcgeo.runs.problem_config import MassConfig
from mcgeo.runs.state_config import StateConfig, with_kind

Keys = Mapping[str, Any]

_AGREEMENT = 1e-3
_SAME_METRIC = 1e-6
_PROJECTED = "projected"
# Interactions that stand for the material's own Coulomb interaction, but know no direction in the plane.
_ISOTROPIC_KINDS = (*LAYERED_KINDS, "yukawa", "softened")

_STATE: TypeAdapter[Any] = TypeAdapter(StateConfig)
_MATERIAL: TypeAdapter[Any] = TypeAdapter(MaterialConfig)
_MASS: TypeAdapter[Any] = TypeAdapter(MassConfig)


def _valid(adapter: TypeAdapter[Any], keys: object, context: Keys | None = None) -> Any:
    try:
        return adapter.validate_python(keys, context=dict(context or {}))
    except ValidationError:
        return None


def filling_of_liquid(keys: object) -> float | None:
    """Filling of the liquid asked for, of the keys of ``state``; None where they are not valid."""
    state = _valid(_STATE, with_kind(keys))
    if state is None:
        return None
    filling = state.filling
    return float(1 - filling if state.conjugate else filling)


def filled(given: Keys, context: Keys | None = None) -> Keys:
    """The keys of a configuration with what its material adds; unchanged where that is not valid.

    Parameters
    ----------
    given : mapping
        As read, valid or not.
    context : mapping
        Of the validation: where the configuration's folder is.
    """
    found = _valid(_MATERIAL, given["material"], context)
    problem = given.get("problem", {})
    if found is None or not isinstance(problem, Mapping):
        return given
    keys = found.model_dump(exclude_none=True)
    filling = filling_of_liquid(given.get("state"))
    if filling is not None:
        keys.update(_field_and_density(keys, filling))
    sample = Sample(material_of(keys), keys["field_tesla"]) if "field_tesla" in keys else None
    return {**given, "material": keys, "problem": _filled_problem(problem, keys, sample)}


def _field_and_density(keys: Keys, filling: float) -> dict[str, float]:
    if "field_tesla" in keys:
        return {"density_per_cm2": keys.get("density_per_cm2", density_of_field(keys["field_tesla"], filling))}
    if "density_per_cm2" in keys:
        return {"field_tesla": field_of_density(keys["density_per_cm2"], filling)}
    return {}


def _filled_problem(problem: Keys, keys: Keys, sample: Sample | None) -> dict[str, Any]:
    material = material_of(keys)
    result = {"mass": turned_mass(keys), **problem}
    interaction = problem.get("interaction", {"kind": "coulomb"})
    if isinstance(interaction, Mapping):
        dielectric = material.dielectric_metric
        if interaction.get("kind") == "coulomb" and dielectric.stretch > 0.0:
            ratio = {"ratio": math.exp(2.0 * dielectric.stretch), "angle_degrees": dielectric.angle_degrees}
            interaction = {**interaction, "dielectric": interaction.get("dielectric", ratio)}
        result["interaction"] = interaction if sample is None else in_magnetic_lengths(interaction, sample)
    if sample is not None and problem.get("variation", _PROJECTED) != _PROJECTED:
        result["level_mixing"] = _or(problem.get("level_mixing"), sample.level_mixing)
    tilt = problem.get("tilt")
    if isinstance(tilt, Mapping):
        result["tilt"] = _filled_tilt(tilt, material, sample)
    return result


def _or(given: Any, otherwise: float) -> Any:
    return otherwise if given is None else given


def _filled_tilt(tilt: Keys, material: Material, sample: Sample | None) -> dict[str, Any]:
    result = dict(tilt)
    result["permittivity_across_ratio"] = _or(tilt.get("permittivity_across_ratio"), material.permittivity_across)
    if material.mass_across is not None:
        ratio = material.mass_across / material.cyclotron_mass
        result["mass_across_ratio"] = _or(tilt.get("mass_across_ratio"), ratio)
    energy = tilt.get("confinement_mev")
    if sample is not None and isinstance(energy, int | float):
        result["confinement_ratio"] = _or(tilt.get("confinement_ratio"), sample.confinement_ratio(energy))
    return result


def material_remarks(given: Keys) -> Iterator[Remark]:
    """What of the filled-in keys does not agree with the material, be the rest valid or not."""
    found = _valid(_MATERIAL, given.get("material"))
    problem = given.get("problem")
    if found is None or not isinstance(problem, Mapping):
        return
    keys = found.model_dump(exclude_none=True)
    material = material_of(keys)
    yield from _field_remarks(keys, filling_of_liquid(given.get("state")))
    yield from _mass_remarks(problem, material)
    yield from _interaction_remarks(problem, material)
    if "field_tesla" in keys:
        yield from _energy_remarks(problem, Sample(material, keys["field_tesla"]))


def _differ(given: object, expected: float) -> bool:
    return isinstance(given, int | float) and abs(given - expected) > _AGREEMENT * abs(expected)


def _field_remarks(keys: Keys, filling: float | None) -> Iterator[Remark]:
    if filling is None or "density_per_cm2" not in keys:
        return
    field, density = keys["field_tesla"], keys["density_per_cm2"]
    expected = density_of_field(field, filling)
    if _differ(density, expected):
        yield Remark(
            ("material", "density_per_cm2"),
            f"{density:.6g} is filling {filling:.6g} at {field_of_density(density, filling):.6g} T, but field_tesla is "
            f"{field:.6g}, where the density is {expected:.6g}; remove one of them",
        )


def _mass_remarks(problem: Keys, material: Material) -> Iterator[Remark]:
    mass = _valid(_MASS, problem.get("mass"))
    if mass is None:
        return
    keys = mass.model_dump()
    if "tensor" in keys:
        metric = UnimodularMetric.from_mass_tensor(keys["tensor"])
    else:
        axes = keys.get("along_axes") or (keys["ratio"], 1.0)
        metric = UnimodularMetric.from_mass_tensor(tensor_along_axes(axes, math.radians(keys["angle_degrees"])))
    if metric.distance(material.mass_metric) > _SAME_METRIC:
        ratio, other = (math.exp(2.0 * m.stretch) for m in (metric, material.mass_metric))
        yield Remark(
            ("problem", "mass"),
            f"a mass ratio of {ratio:.6g} does not go with the material, whose own is {other:.6g} at "
            f"{material.mass_metric.angle_degrees:.6g} degrees; remove one of them",
            at_key=True,
        )


def _interaction_remarks(problem: Keys, material: Material) -> Iterator[Remark]:
    interaction = problem.get("interaction")
    if not isinstance(interaction, Mapping):
        return
    dielectric, own = interaction.get("dielectric"), material.dielectric_metric
    if isinstance(dielectric, Mapping) and isinstance(dielectric.get("ratio"), int | float) and dielectric["ratio"] > 0:
        angle = dielectric.get("angle_degrees", 0.0)
        metric = UnimodularMetric(0.5 * math.log(dielectric["ratio"]), math.radians(angle))
        if metric.distance(own) > _SAME_METRIC:
            yield Remark(
                ("problem", "interaction", "dielectric"),
                f"a ratio of {dielectric['ratio']:.6g} does not go with the material, whose own is "
                f"{math.exp(2.0 * own.stretch):.6g} at {own.angle_degrees:.6g} degrees; remove one of them",
                at_key=True,
            )
    if own.stretch > 0.0 and interaction.get("kind") in _ISOTROPIC_KINDS:
        yield Remark(
            ("problem", "interaction", "kind"),
            "must be coulomb where the permittivity of the material is anisotropic in the plane, "
            f"not {interaction['kind']}",
        )


def _energy_remarks(problem: Keys, sample: Sample) -> Iterator[Remark]:
    given = problem.get("level_mixing")
    if _differ(given, sample.level_mixing):
        yield Remark(
            ("problem", "level_mixing"),
            f"{given:.6g} does not go with the material, which has {sample.level_mixing:.6g} at "
            f"{sample.field_tesla:.6g} T; remove it",
        )
    tilt = problem.get("tilt")
    if not isinstance(tilt, Mapping) or not isinstance(tilt.get("confinement_mev"), int | float):
        return
    given, expected = tilt.get("confinement_ratio"), sample.confinement_ratio(tilt["confinement_mev"])
    if _differ(given, expected):
        yield Remark(
            ("problem", "tilt", "confinement_ratio"),
            f"{given:.6g} does not go with confinement_mev, which is {expected:.6g} cyclotron energies of "
            f"{sample.cyclotron_energy_mev:.6g} meV; remove one of them",
        )
