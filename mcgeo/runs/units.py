"""Results in the units of a sample: nm, meV and K beside l_B and e^2/(4 pi eps l_B)."""

from __future__ import annotations

import math
from collections.abc import Mapping
from fractions import Fraction
from typing import Any

from mcgeo.problem.material import energies_in, material_summary
from mcgeo.runs.material_sample import sample_of

_ENERGIES = ("energy", "gain_isotropic", "gain_mass", "isotropic_stiffness")


def with_units(summary: dict[str, Any], resolved: Mapping[str, Any]) -> dict[str, Any]:
    """The JSON object of a command with ``units`` and converted energies, if the configuration names a sample.

    ``units`` tells length, energies, field and density of the sample. ``optimum`` gets every energy as ``_mev`` and
    ``_kelvin`` (per electron) with its error, and ``stiffness_mev_per_nm2``: the Hessian of the energy per area, the
    shear modulus of the shape, n K with the density n = nu/(2 pi l_B^2). Energies of ``sample`` are converted alike.
    """
    sample = sample_of(resolved)
    if sample is None:
        return summary
    filling = float(Fraction(summary["state"]["filling"]))
    found = {**summary, "units": material_summary(sample, filling)}
    if "optimum" in summary:
        best = summary["optimum"]
        names = [name for key in _ENERGIES for name in (key, f"{key}_error") if name in best]
        converted = energies_in(sample, {name: best[name] for name in names})
        found["optimum"] = {**best, **converted}
        if "stiffness" in best:
            per_area = sample.mev(1.0) * filling / (2.0 * math.pi * sample.magnetic_length_nm**2)
            for key in ("stiffness", "stiffness_error"):
                found["optimum"][f"{key}_mev_per_nm2"] = [[per_area * k for k in row] for row in best[key]]
            for key in ("stiffness_along", "stiffness_across"):
                found["optimum"][f"{key}_mev_per_nm2"] = per_area * best[key]
                found["optimum"][f"{key}_mev_per_nm2_error"] = per_area * best[f"{key}_error"]
    for key in ("energy_torus", "energy_plane", "energy_disk"):
        if key in summary:
            pair = {"value": summary[key]["value"], "error": summary[key]["error"]}
            found[key] = {**summary[key], **energies_in(sample, pair)}
    return found
