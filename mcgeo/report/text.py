"""Results as lines of text."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from mcgeo.estimate.statistics import Estimate
from mcgeo.report.catalogue_text import origin_rows
from mcgeo.report.numbers import value_with_error

ENERGY_UNIT = "e^2/(4 pi eps l_B)"

_VERDICTS = {
    "stable": "stable: the hole follows the anisotropy less than in proportion",
    "soft": "soft: the response is above one, the hole exaggerates a weak anisotropy of the mass",
    "unstable": "unstable: the isotropic hole is no minimum of the isotropic problem",
}
_NO_MINIMUM = "unstable: no minimum within the range searched, the energy falls to its edge"
_ADVICE = {
    "short": "raise sampling.sweeps or sampling.walkers",
    "mixing": "raise sampling.equilibration and sampling.sweeps",
    "stuck": "lower sampling.step or leave it out to have it tuned",
}


def _pair(keys: Mapping[str, Any], name: str) -> str:
    error = keys.get(f"{name}_error")
    return value_with_error(Estimate(keys[name], math.inf if error is None else error))


def _estimate(keys: Mapping[str, float]) -> str:
    return value_with_error(Estimate(keys["value"], keys["error"]))


def _lines(rows: list[tuple[str, str]]) -> str:
    width = max(len(name) for name, _ in rows)
    return "\n".join(f"{name.ljust(width)}  {text}" for name, text in rows)


def _health_rows(keys: Mapping[str, Any]) -> list[tuple[str, str]]:
    return [
        ("acceptance", f"{keys['acceptance']:.3f}"),
        ("autocorrelation time", f"{keys['autocorrelation_time']:.1f} sweeps"),
        ("independent energies", f"{keys['effective_samples']:.3g}"),
        *_control_rows(keys),
        *_target_rows(keys),
        ("verdict on the run", verdict_text(keys)),
    ]


def verdict_text(keys: Mapping[str, Any]) -> str:
    """Verdict on a run of ``diagnostics``, its reasons and what to do."""
    verdict = str(keys["verdict"])
    if verdict == "converged":
        return verdict
    reasons = "; ".join(keys["reasons"])
    if reasons.startswith("incomplete"):
        return f"{verdict}: {reasons}; the same command goes on"
    wanted = keys["sweeps_to_add"]
    advice = _ADVICE[verdict] if wanted is None else f"mcgeo sample CONFIG --extend {wanted}"
    return f"{verdict}: {reasons}; {advice}"


def _target_rows(keys: Mapping[str, Any]) -> list[tuple[str, str]]:
    if "target" not in keys:
        return []
    target = keys["target"]
    said = "reached" if target["reached"] else "not reached"
    error = f"error of the {target['quantity']} {target['error']:.2g}"
    return [("target", f"{said}: {error}, wanted {target['wanted']:.2g}, after {target['sweeps']:g} sweeps")]


def _control_rows(keys: Mapping[str, Any]) -> list[tuple[str, str]]:
    if "controls" not in keys:
        return []
    said = {
        "used": f"used; variance of the energy {keys['variance_reduction']:.1f} times smaller",
        "few_blocks": "not used: too few blocks; raise sampling.blocks or sampling.walkers",
        "not_zero": "not used: their mean is not zero, walkers are not in equilibrium; raise sampling.equilibration",
    }
    return [("control variates", said[keys["controls"]])]


def _unit_rows(summary: Mapping[str, Any]) -> list[tuple[str, str]]:
    """What a sample of a material adds."""
    if "units" not in summary:
        return []
    units = summary["units"]
    rows = [
        (
            units["material"],
            f"{units['field_tesla']:.5g} T, {units['density_per_cm2']:.4g} electrons per cm^2, "
            f"magnetic length {units['magnetic_length_nm']:.4g} nm",
        ),
        (
            "energy unit",
            f"{units['coulomb_energy_mev']:.5g} meV = {units['coulomb_energy_kelvin']:.5g} K; cyclotron energy "
            f"{units['cyclotron_energy_mev']:.5g} meV, level mixing {units['level_mixing']:.4g}",
        ),
    ]
    best = summary.get("optimum")
    if best is not None and "energy_mev" in best:
        rows.append(
            (
                "that gain in units",
                f"{best['gain_isotropic_mev']:.4g} meV = {best['gain_isotropic_kelvin']:.4g} K per electron",
            )
        )
    if best is not None and "stiffness_along_mev_per_nm2" in best:
        rows.append(("stiffness along, per area", f"{_pair(best, 'stiffness_along_mev_per_nm2')} meV/nm^2"))
    return rows


def sample_text(summary: Mapping[str, Any]) -> str:
    """Lines for `mcgeo.runs.sample_summary.sample_summary`; energies per electron."""
    state = summary["state"]
    rows = [
        ("state", f"{state['label']}, {state['liquid_electrons']} electrons"),
        ("interaction", summary["interaction"]),
        ("energy, this cell", f"{_estimate(summary['energy_torus'])} {ENERGY_UNIT}"),
        ("energy, infinite liquid", f"{_estimate(summary['energy_plane'])} {ENERGY_UNIT}"),
        ("moves per second", f"{summary['moves_per_second']:.3g}"),
        *_unit_rows(summary),
        *_health_rows(summary["diagnostics"]),
    ]
    return _lines(rows)


def droplet_text(summary: Mapping[str, Any]) -> str:
    """Lines for `mcgeo.runs.droplet_summary.droplet_summary`; energies per electron."""
    state, energy = summary["state"], summary["energy_disk"]
    moments = summary["second_moments"]
    rows = [
        ("state", f"{state['label']}, {state['electrons']} electrons"),
        ("energy", f"{_estimate(energy)} {ENERGY_UNIT}"),
        ("electrons with electrons", _pair(energy, "electron_electron")),
        ("electrons with background", _pair(energy, "electron_background")),
        ("background with itself", f"{energy['background_background']:.8g}"),
        ("<x^2>, <y^2>, <xy>", ", ".join(_estimate(moments[key]) for key in ("xx", "yy", "xy")) + " l_B^2"),
        ("moves per second", f"{summary['moves_per_second']:.3g}"),
        *_unit_rows(summary),
        *_health_rows(summary["diagnostics"]),
    ]
    return _lines(rows)


def scan_text(summary: Mapping[str, Any]) -> str:
    """Lines for `mcgeo.runs.scan.scan_summary`; energies per electron."""
    state, problem, best = summary["state"], summary["problem"], summary["optimum"]
    level = problem["level"]
    rows = [
        ("state", f"{state['label']}, {state['liquid_electrons']} electrons"),
        ("interaction", f"{problem['interaction_name']}, level {level}"),
        ("variation", problem["variation"].replace("_", " ")),
        ("mass", f"stretch {problem['mass_stretch']:.5g} at {problem['mass_angle_degrees']:.4g} degrees"),
        ("orbit", f"stretch {_pair(best, 'orbit_stretch')} at {best['orbit_angle_degrees']:.4g} degrees"),
        ("hole: stretch", _pair(best, "stretch")),
        ("hole: angle", _hole_angle(best)),
        ("hole: aspect ratio", _pair(best, "aspect_ratio")),
        ("energy", f"{_pair(best, 'energy')} {ENERGY_UNIT}"),
        ("gain over isotropic hole", _pair(best, "gain_isotropic")),
        ("gain over hole like mass", _pair(best, "gain_mass")),
        ("stiffness along, across", f"{_pair(best, 'stiffness_along')}, {_pair(best, 'stiffness_across')}"),
        ("response to weak mass", _pair(best, "response")),
        ("verdict on the shape", _VERDICTS[best["shape_verdict"]] if best["interior"] else _NO_MINIMUM),
        *_unit_rows(summary),
        *(origin_rows(summary) if "origin" in state else _health_rows(summary["diagnostics"])),
    ]
    return _lines(rows)


def torus_text(summary: Mapping[str, Any]) -> str:
    """Lines for `mcgeo.runs.torus_summary.torus_summary`; energies per electron."""
    state, problem, best = summary["state"], summary["problem"], summary["optimum"]
    rows = [
        ("state", f"{state['label']}, {state['liquid_electrons']} electrons, every metric on the cell"),
        ("interaction", f"{problem['interaction_name']}, level {problem['level']}"),
        ("hole: stretch", f"{_pair(best, 'stretch')} at {best['angle_degrees']:.4g} degrees"),
        ("hole: aspect ratio", _pair(best, "aspect_ratio")),
        ("energy", f"{_pair(best, 'energy')} {ENERGY_UNIT}"),
        ("gain over isotropic hole", _pair(best, "gain_isotropic")),
        ("stiffness along", _pair(best, "stiffness_along")),
        ("polynomial", f"degree {best['fit_degree']}, probability of its chi-square {best['fit_probability']:.2f}"),
        ("minimum", "inside the range" if best["interior"] else "none inside the range: widen scan.stretch"),
        *_unit_rows(summary),
        *_health_rows(summary["diagnostics"]),
    ]
    return _lines(rows)


def comparison_text(summary: Mapping[str, Any]) -> str:
    """The plane's lines, then a table of both roads."""
    head = f"{'stretch':>9}  {'torus':>14}  {'plane':>14}  {'difference':>11}  {'law':>11}  {'errors off':>10}"
    lines = [
        f"{row['stretch']:9.4f}  {_pair(row, 'energy_torus'):>14}  {_pair(row, 'energy_plane'):>14}  "
        f"{row['difference']:11.6f}  {row['finite_size_law']:11.6f}  {row['deviation_in_errors']:10.2f}"
        for row in summary["comparison"]
    ]
    best = summary["torus"]
    return "\n".join(
        [
            scan_text(summary),
            "",
            f"torus: stretch {_pair(best, 'stretch')}, energy {_pair(best, 'energy')} {ENERGY_UNIT}",
            "law: what the finite cell adds to the infinite liquid; errors off: (difference - law) in standard errors",
            "",
            head,
            *lines,
        ]
    )


def _hole_angle(best: Mapping[str, Any]) -> str:
    if best["stretch"] == 0.0:
        return "none (a circle)"
    return f"{value_with_error(Estimate(best['angle_degrees'], best['angle_error']))} degrees, its short axis"
