"""The numbers of catalogue liquids: what a scan adds, the plan, and the list of entries."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from mcgeo.estimate.statistics import mean_estimate
from mcgeo.geometry.metric import ISOTROPIC
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.problem import Problem
from mcgeo.runs.catalogue import CatalogueLiquid, catalogue_liquid
from mcgeo.runs.scan import optimum, optimum_summary
from mcgeo.runs.state_config import CATALOGUE_NAMES
from mcgeo.variational.energy_surface import EnergySurface


def with_error_parts(
    summary: Mapping[str, Any], liquid: CatalogueLiquid, problem_keys: Mapping[str, Any]
) -> dict[str, Any]:
    """The JSON object of ``scan`` with ``optimum.error_parts``: what of every error is statistical, what finite size.

    The two make the error in quadrature.
    """
    statistical = optimum_summary(optimum(liquid.statistical_occupations, problem_keys))
    best = summary["optimum"]
    parts = {
        key: _parts(best[key], statistical[key])
        for key in best
        if key.endswith("_error") and key in statistical
    }
    return {**summary, "optimum": {**best, "error_parts": parts}}


def _parts(total: Any, statistical: Any) -> dict[str, Any]:
    whole, noise = np.asarray(total, dtype=float), np.asarray(statistical, dtype=float)
    known = np.isfinite(whole) & np.isfinite(noise)
    # Rounding, and what is not linear, can leave the whole a hair smaller than its part.
    square = np.where(known, whole, 0.0) ** 2 - np.where(known, noise, 0.0) ** 2
    finite_size = np.where(known, np.sqrt(np.maximum(square, 0.0)), np.inf)
    return {"statistical": noise.tolist(), "finite_size": finite_size.tolist()}


def catalogue_plan(resolved: Mapping[str, Any]) -> dict[str, Any]:
    """What of a plan belongs to the sampling, which for a liquid of the catalogue has been done."""
    state = catalogue_liquid(resolved["state"]).state_summary()
    large, small = state["origin"]["large"], state["origin"]["small"]
    return {
        "state": state["label"],
        "filling": state["filling"],
        "catalogue": state["catalogue"],
        "electrons": large["electrons"],
        "electrons_compared_with": small["electrons"],
        "seed": large["seed"],
        "sampled_by": f"mcgeo {large['mcgeo_version']}",
        "blocks": 0,
        "core_seconds": 0.0,
        "estimated_megabytes": 0.0,
    }


def catalogue_rows() -> list[dict[str, Any]]:
    """One object per liquid: name, filling, sizes, and the Coulomb energy of its isotropic state in level 0.

    Raises
    ------
    StorageError
        If the shipped file is damaged.
    """
    return [_row(name) for name in CATALOGUE_NAMES]


def _row(name: str) -> dict[str, Any]:
    liquid = catalogue_liquid({"kind": "catalogue", "catalogue": name, "conjugate": False})
    state = liquid.state_summary()
    problem = Problem(ISOTROPIC, Coulomb())
    total, statistical = (
        mean_estimate(EnergySurface(found, problem).sample_energies(ISOTROPIC))
        for found in (liquid.occupations, liquid.statistical_occupations)
    )
    return {
        "catalogue": name,
        "label": state["label"],
        "filling": state["filling"],
        "statistics": state["statistics"],
        "energy_plane": {**total.as_dict(), "error_parts": _parts(total.error, statistical.error)},
        "origin": state["origin"],
    }
