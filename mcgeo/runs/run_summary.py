"""The numbers of a run that do not depend on what was sampled."""

from __future__ import annotations

from typing import Any

from mcgeo.runs.sampled import Sampled


def run_summary(result: Sampled) -> dict[str, Any]:
    """Acceptance, step, seed and speed."""
    return {
        "acceptance": result.diagnostics.acceptance,
        "step": result.chains[0].step,
        "seed": result.resolved["sampling"]["seed"],
        "seconds": result.seconds,
        "moves_per_second": result.moves / result.seconds,
        "complete": result.complete,
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
        **result.control_summary,
    }
