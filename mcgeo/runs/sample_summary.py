"""The numbers of one sampled liquid: what ``sample`` prints and hands on."""

from __future__ import annotations

from typing import Any

from mcgeo.runs.build import interaction_from
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.run_summary import run_summary


def sample_summary(liquid: Liquid) -> dict[str, Any]:
    """The JSON object of ``sample``.

    ``energy_torus`` is the energy of the sampled state on its cell; ``energy_plane`` is `Liquid.energy`.
    """
    interaction = interaction_from(liquid.resolved["problem"]["interaction"])
    occupations, plane = liquid.occupations, liquid.energy
    filling = float(occupations.filling)
    return {
        "state": liquid.state_summary(),
        "interaction": interaction.name,
        "energy_torus": liquid.torus_energy(interaction).as_dict(),
        "energy_plane": plane.as_dict(),
        "energy_plane_per_flux": {"value": filling * plane.value, "error": filling * plane.error},
        "occupations": [
            {"m": int(m), **occupations.occupation(index).as_dict()} for index, m in enumerate(occupations.m)
        ],
        **run_summary(liquid),
        "diagnostics": liquid.diagnostics_summary(),
    }
