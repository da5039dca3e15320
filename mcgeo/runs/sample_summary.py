"""The numbers of one sampled liquid: what ``sample`` prints and hands on."""

from __future__ import annotations

from typing import Any

from mcgeo.estimate.statistics import mean_estimate
from mcgeo.problem.landau_level import LOWEST
from mcgeo.problem.problem import Problem
from mcgeo.runs.build import interaction_from
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.run_summary import run_summary
from mcgeo.variational.energy_surface import EnergySurface


def sample_summary(liquid: Liquid) -> dict[str, Any]:
    """The JSON object of ``sample``.

    ``energy_torus`` is the energy of the sampled state on its cell; ``energy_plane`` that of the infinite liquid from
    the pair occupations, orbit and hole having the state's metric, in the lowest level, for the configured
    interaction.
    """
    interaction = interaction_from(liquid.resolved["problem"]["interaction"])
    occupations = liquid.occupations
    metric = liquid.frame.metric
    surface = EnergySurface(occupations, Problem(metric, interaction, LOWEST))
    plane = mean_estimate(surface.sample_energies(metric))
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
