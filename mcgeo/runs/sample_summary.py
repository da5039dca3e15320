"""The numbers of one sampled liquid: what ``sample`` prints and hands on."""

from __future__ import annotations

from typing import Any

from mcgeo.estimate.statistics import mean_estimate
from mcgeo.problem.landau_level import LOWEST
from mcgeo.problem.problem import Problem
from mcgeo.runs.build import interaction_from
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.sampled import Sampled
from mcgeo.variational.energy_surface import EnergySurface


def state_summary(liquid: Liquid) -> dict[str, Any]:
    """``state`` of the JSON output: its keys, with the filling of the liquid asked for as text."""
    found = liquid.occupations
    return {
        **liquid.resolved["state"],
        "filling": str(found.filling),
        "statistics": found.statistics,
        "label": found.label,
        "liquid_electrons": liquid.n_electrons,
    }


def diagnostics_summary(result: Sampled) -> dict[str, Any]:
    """``diagnostics`` of the JSON output."""
    health = result.diagnostics
    return {
        "acceptance": health.acceptance,
        "autocorrelation_time": health.autocorrelation_time,
        "effective_samples": health.effective_samples,
        "r_hat": health.r_hat,
        "drift": float(result.blocks.drift.max()),
        "verdict": health.verdict if result.complete else "short",
    }


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
        "state": state_summary(liquid),
        "interaction": interaction.name,
        "energy_torus": liquid.torus_energy(interaction).as_dict(),
        "energy_plane": plane.as_dict(),
        "energy_plane_per_flux": {"value": filling * plane.value, "error": filling * plane.error},
        "occupations": [
            {"m": int(m), **occupations.occupation(index).as_dict()} for index, m in enumerate(occupations.m)
        ],
        "acceptance": liquid.diagnostics.acceptance,
        "step": liquid.chains[0].step,
        "seed": liquid.resolved["sampling"]["seed"],
        "seconds": liquid.seconds,
        "moves_per_second": liquid.moves / liquid.seconds,
        "complete": liquid.complete,
        "diagnostics": diagnostics_summary(liquid),
    }
