"""A liquid of the catalogue: what a scan and the figures need, without sampling.

Everything follows from the occupations of the larger of two systems. The difference of the occupations of both sizes
is taken as their finite-size error: it enters, in quadrature, the error of every number that follows from them.
Where the deviation from the infinite liquid falls as 1/N or faster and the sizes are one to two, it is at most that
difference.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import ConfigError
from mcgeo.estimate.conjugate import conjugate_occupations, conjugate_structure
from mcgeo.estimate.occupations import PairOccupations
from mcgeo.estimate.statistics import samples_with_deviation
from mcgeo.estimate.structure_factor import Curve
from mcgeo.problem.problem import Problem
from mcgeo.runs.catalogue_file import CatalogueEntry, CatalogueRun, read_entry
from mcgeo.variational.energy_surface import Surface
from mcgeo.variational.variation import Variation, surface_of

Array = NDArray[np.float64]

KIND = "catalogue"


@dataclass(frozen=True, eq=False)
class CatalogueLiquid:
    """A liquid of the catalogue, or its hole conjugate.

    Attributes
    ----------
    state : mapping
        Keys of ``state`` in the configuration.
    entry : CatalogueEntry
    """

    state: Mapping[str, Any]
    entry: CatalogueEntry

    @cached_property
    def statistical_occupations(self) -> PairOccupations:
        """Pair occupations of the larger system, with the samples of its walkers."""
        large = self.entry.large
        return self._asked_for(large.m, large.samples, large.free_errors)

    @cached_property
    def occupations(self) -> PairOccupations:
        """The same with samples whose errors hold the finite-size difference; see `samples_with_deviation`."""
        large, small = self.entry.large, self.entry.small
        m = max((large.m, small.m), key=len)
        deviation = _padded(small.samples.mean(axis=0), len(m)) - _padded(large.samples.mean(axis=0), len(m))
        samples = samples_with_deviation(_padded(large.samples, len(m)), deviation)
        return self._asked_for(m, samples, np.hypot(_padded(large.free_errors, len(m)), deviation))

    def _asked_for(self, m: NDArray[np.int64], samples: Array, free_errors: Array) -> PairOccupations:
        entry = self.entry
        sampled = PairOccupations(entry.label, Fraction(entry.filling), entry.statistics, m, samples, free_errors)
        return conjugate_occupations(sampled) if self.state["conjugate"] else sampled

    @property
    def structure(self) -> Curve:
        """S(q) of the larger system over waves of equal length."""
        curve = self.entry.large.structure
        if not self.state["conjugate"]:
            return curve
        filling = Fraction(self.entry.filling)
        value = conjugate_structure(filling, curve.x, curve.value)
        return Curve(curve.x, value, float(filling / (1 - filling)) * curve.error)

    def energy_surface(self, problem: Problem, variation: Variation) -> Surface:
        """Energy of every sample over the hole's metric."""
        return surface_of(self.occupations, problem, variation)

    def state_summary(self) -> dict[str, Any]:
        """``state`` of the JSON output: its keys, with where the numbers come from."""
        found, large = self.occupations, self.entry.large
        n = large.n_electrons
        return {
            **self.state,
            "filling": str(found.filling),
            "statistics": found.statistics,
            "label": found.label,
            "liquid_electrons": round(n / Fraction(self.entry.filling)) - n if self.state["conjugate"] else n,
            "origin": {size: _origin(getattr(self.entry, size)) for size in ("large", "small")},
        }

    def diagnostics_summary(self) -> dict[str, Any]:
        """``diagnostics`` of the larger system's sampling."""
        return dict(self.entry.large.diagnostics)


def catalogue_liquid(state: Mapping[str, Any]) -> CatalogueLiquid:
    """The liquid of resolved keys of ``state``.

    Raises
    ------
    StorageError
        If the shipped file is damaged.
    """
    return CatalogueLiquid(state, read_entry(state["catalogue"]))


def require_sampled_state(state: Mapping[str, Any]) -> None:
    """Refuse a liquid of the catalogue where walkers have to run.

    Raises
    ------
    ConfigError
        Saying what works with it.
    """
    if state["kind"] == KIND:
        raise ConfigError(
            [f"state.catalogue: {state['catalogue']} is sampled already, there is nothing to sample; use scan or plot"]
        )


def _padded(values: Array, n_m: int) -> Array:
    """With zeros for the m that one size has not: c_m = 0 is no correlation."""
    return np.pad(values, [(0, 0)] * (values.ndim - 1) + [(0, n_m - values.shape[-1])])


def _origin(run: CatalogueRun) -> dict[str, Any]:
    sampling = run.resolved["sampling"]
    return {
        "electrons": run.n_electrons,
        "seed": sampling["seed"],
        "walkers": sampling["walkers"],
        "sweeps": sampling["sweeps"],
        "equilibration": sampling["equilibration"],
        "mcgeo_version": run.mcgeo_version,
        "libraries": dict(run.libraries),
        "verdict": run.diagnostics["verdict"],
    }
