"""The numbers of a scan on the finite-torus road."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from mcgeo.estimate.diagnostics import CONVERGED, SHORT
from mcgeo.runs.scan import estimate_pair, problem_summary
from mcgeo.runs.torus_road import Comparison, TorusPoint, TorusRoad


def torus_summary(road: TorusRoad, problem_keys: Mapping[str, Any]) -> dict[str, Any]:
    """The JSON object of ``scan`` with ``road: torus``.

    Keys as on the plane; what one line of metrics cannot tell (stiffness across it, response) is left out.
    """
    best = road.minimum
    aspect = math.exp(best.position.value)
    worst = min(road.points, key=_health)
    return {
        "state": {**worst.liquid.state_summary(), "metric": None},
        "road": "torus",
        "problem": problem_summary(road.problem, problem_keys),
        "optimum": {
            **estimate_pair("stretch", best.position),
            "angle_degrees": math.degrees(road.angle),
            "aspect_ratio": aspect,
            "aspect_ratio_error": aspect * best.position.error,
            **estimate_pair("energy", best.value),
            **estimate_pair("gain_isotropic", best.gain_at_zero),
            "stiffness_along": best.curvature.value,
            "stiffness_along_error": best.curvature.error,
            "interior": best.interior,
            "fit_degree": best.degree,
            "fit_probability": best.probability,
        },
        "curve": [
            {
                "stretch": point.stretch,
                "angle_degrees": math.degrees(road.angle),
                "energy": point.energy.value,
                "energy_error": point.energy.error,
                "verdict": point.liquid.diagnostics.verdict,
            }
            for point in road.points
        ],
        "diagnostics": {**worst.liquid.diagnostics_summary(), **_curve_verdict(road)},
    }


def _health(point: TorusPoint) -> tuple[bool, float]:
    """Worst first: what has not converged, then what has the fewest samples."""
    found = point.liquid.diagnostics
    return found.verdict == CONVERGED, found.effective_samples


def _curve_verdict(road: TorusRoad) -> dict[str, Any]:
    """``short`` when the curve is no deeper than its errors: hole and orbit far apart make energies noisy."""
    energies = [point.energy for point in road.points]
    depth = max(e.value for e in energies) - min(e.value for e in energies)
    noisy = 3.0 * max(e.error for e in energies) > depth or road.minimum.gain_at_zero.value < 0.0
    if not noisy:
        return {}
    return {"verdict": SHORT, "reasons": ["the curve is no deeper than its errors"], "sweeps_to_add": None}


def comparison_summary(rows: list[Comparison]) -> list[dict[str, Any]]:
    """``comparison`` of the JSON output: one object per metric."""
    return [
        {
            "stretch": row.stretch,
            **estimate_pair("energy_torus", row.torus),
            **estimate_pair("energy_plane", row.plane),
            "difference": row.torus.value - row.plane.value,
            "finite_size_law": row.finite_size,
            "deviation_in_errors": row.deviation,
        }
        for row in rows
    ]
