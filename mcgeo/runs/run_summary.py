"""The numbers of a run that do not depend on what was sampled."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING, Any, Protocol

from mcgeo.runs.ending import target_summary

if TYPE_CHECKING:
    from mcgeo.runs.sampled import Sampled


class Described(Protocol):
    """What says which liquid a result is of."""

    @property
    def label(self) -> str:
        """Words for reports."""

    @property
    def filling(self) -> Fraction:
        """Electrons per flux quantum."""

    @property
    def statistics(self) -> str:
        """``fermions`` or ``bosons``."""


def state_summary(result: Sampled, found: Described, n_electrons: int) -> dict[str, Any]:
    """``state`` of the JSON output: its keys, with the filling of what was asked for as text."""
    return {
        **result.resolved["state"],
        "filling": str(found.filling),
        "statistics": found.statistics,
        "label": found.label,
        "liquid_electrons": n_electrons,
    }


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
    health, target = result.diagnostics, target_summary(result)
    return {
        "verdict": health.verdict,
        "reasons": list(health.reasons),
        "sweeps_to_add": health.sweeps_to_add,
        "acceptance": health.acceptance,
        "least_acceptance": health.least_acceptance,
        "autocorrelation_time": health.autocorrelation_time,
        "effective_samples": health.effective_samples,
        "bulk_samples": health.bulk_samples,
        "tail_samples": health.tail_samples,
        "r_hat": health.r_hat,
        "r_hat_limit": health.r_hat_limit,
        "blocking": {
            "error": health.blocking.error,
            "error_error": health.blocking.error_error,
            "block_sweeps": health.blocking.block,
            "plateau": health.blocking.reached,
        },
        "drift": health.drift,
        "rules_z": {**health.rules, **result.bulk_rules},
        **({} if target is None else {"target": target}),
        **result.control_summary,
    }
