"""Names of swept keys and of results as they stand at the axes of figures: symbol and unit."""

from __future__ import annotations

import json

_UNITS = {
    "1": "",
    "l_B": r"$\ell_B$",
    "1/l_B": r"$1/\ell_B$",
    "e^2/(4 pi eps l_B) per electron": r"$(e^2/4\pi\varepsilon\ell_B)$ per electron",
    "1/cm^2": r"cm$^{-2}$",
    "meV/nm^2": r"meV nm$^{-2}$",
}
_KEYS = {
    "problem.mass.ratio": "mass ratio $m_x/m_y$",
    "problem.mass.angle_degrees": r"angle $\theta_m$ of the mass",
    "problem.level": "Landau level $n$",
    "problem.level_mixing": r"level mixing $\kappa$",
    "problem.interaction": "interaction",
    "problem.interaction.width": "width $w$",
    "problem.interaction.distance": "distance $d$",
    "problem.interaction.dielectric.ratio": r"permittivity ratio $\varepsilon_x/\varepsilon_y$",
    "problem.tilt.angle_degrees": "tilt of the field",
    "material.field_tesla": "magnetic field $B$",
    "material.density_per_cm2": "electron density",
    "material.name": "material",
    "state.exponent": "exponent $m$",
    "state.electrons": "electrons $N$",
    "state.catalogue": "liquid",
}
_QUANTITIES = {
    "stretch": "stretch $Q^*$ of the hole",
    "angle_degrees": r"angle $\theta^*$ of the hole",
    "aspect_ratio": "aspect ratio $e^{Q^*}$ of the hole",
    "energy": "energy $E^*$",
    "gain_isotropic": "gain over the isotropic hole",
    "gain_mass": "gain over a hole like the mass",
    "stiffness_along": r"stiffness $K_\parallel$ along the stretch",
    "stiffness_across": r"stiffness $K_\perp$ across the stretch",
    "isotropic_stiffness": "stiffness $K$ of the isotropic problem",
    "response": r"response $dQ^*/dQ_m$",
    "orbit_stretch": "stretch of the orbit",
    "orbit_aspect_ratio": "aspect ratio of the orbit",
    "mass_stretch": "stretch $Q_m$ of the mass",
}
_LONG_LABEL = 36
_VALUE_UNITS = {"_nm": " nm", "_degrees": "°", "_tesla": " T"}
_UNIT_ENDINGS = ("_mev_per_nm2", "_mev", "_kelvin")


def unit_text(unit: str) -> str:
    """A unit as it is drawn; empty for plain numbers."""
    return _UNITS.get(unit, unit)


def with_unit(words: str, unit: str) -> str:
    """``words / unit``; words alone for plain numbers."""
    shown = unit_text(unit)
    if not shown:
        return words
    # The side of a figure of one column holds so many letters.
    return f"{words}\n/ {shown}" if len(words) + len(unit) > _LONG_LABEL else f"{words} / {shown}"


def key_label(key: str, unit: str) -> str:
    """A swept key at an axis: its symbol, or the last part of its name."""
    name = key.removesuffix("_nm")
    return with_unit(_KEYS.get(key) or _KEYS.get(name) or name.rpartition(".")[2].replace("_", " "), unit)


def quantity_label(name: str, unit: str) -> str:
    """A result at an axis."""
    plain = name
    for ending in _UNIT_ENDINGS:
        plain = plain.removesuffix(ending)
    return with_unit(_QUANTITIES.get(plain, plain.replace("_", " ")), unit)


def value_label(value: object) -> str:
    """A swept value: digits, or a group of keys in words, its kind first."""
    if not isinstance(value, str):
        return f"{float(value):.4g}"  # type: ignore[arg-type]
    try:
        group = json.loads(value)
    except ValueError:
        return value
    if not isinstance(group, dict):
        return value
    kind = str(group.pop("kind", "")).replace("_", " ")
    return ", ".join([*([kind] if kind else []), *(_entry(key, item) for key, item in group.items())])


def _entry(key: str, value: object) -> str:
    for ending, unit in _VALUE_UNITS.items():
        if key.endswith(ending):
            return f"{key.removesuffix(ending).replace('_', ' ')} {value}{unit}".strip()
    return f"{key.replace('_', ' ')} {value}"
