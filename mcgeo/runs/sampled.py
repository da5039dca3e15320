"""What every result file holds: block means, where the chains stand, and whether to trust them."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from mcgeo.estimate.diagnostics import Diagnostics, RunLength, diagnose
from mcgeo.estimate.statistics import Estimate, independent_samples, integrated_autocorrelation_time
from mcgeo.problem.problem import Problem
from mcgeo.runs.build import problem_from, schedule_from, variation_from
from mcgeo.runs.ending import ending_of, missed_target
from mcgeo.runs.run_summary import diagnostics_summary
from mcgeo.runs.sampling_config import ENERGY
from mcgeo.sampling.blocks import BlockRecord
from mcgeo.sampling.chain import ChainState, Schedule
from mcgeo.states.base import SampledState
from mcgeo.variational.energy_surface import Surface
from mcgeo.variational.minimum import find_minimum
from mcgeo.variational.variation import Variation

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Blocks:
    """Block means of a run; a liquid that is an average over sectors has one component per sector.

    Attributes
    ----------
    means : mapping of name to ndarray, shape (n_blocks, n_walkers, ...)
        Averaged over components walker by walker: walkers stay independent.
    counts : mapping of name to ndarray of int64, shape (n_blocks, n_walkers, n_bins)
        Summed over components.
    trace : ndarray, shape (n_components, n_blocks, n_walkers, n_measurements)
        Energy per electron of single configurations.
    accepted : ndarray, shape (n_components, n_blocks, n_walkers)
    drift : ndarray, shape (n_components, n_blocks)
    """

    means: Mapping[str, Array]
    counts: Mapping[str, NDArray[np.int64]]
    trace: Array
    accepted: Array
    drift: Array

    @classmethod
    def from_records(cls, records: Sequence[Sequence[BlockRecord]], trace_offset: float) -> Blocks:
        """From the records of each block (first index) and component; ``trace_offset`` is added to the trace."""
        first = records[0][0]

        def mean(name: str) -> Array:
            return np.array([np.mean([r.means[name] for r in block], axis=0) for block in records])

        def total(name: str) -> NDArray[np.int64]:
            return np.array([np.sum([r.counts[name] for r in block], axis=0) for block in records])

        def by_component(values: list[list[Any]]) -> Array:
            # In the order in which a file has them: sums over them are then the same to the last bit.
            return np.ascontiguousarray(np.array(values).swapaxes(0, 1))

        return cls(
            {name: mean(name) for name in first.means},
            {name: total(name) for name in first.counts},
            by_component([[r.trace for r in block] for block in records]) + trace_offset,
            by_component([[r.accepted for r in block] for block in records]),
            by_component([[r.drift for r in block] for block in records]),
        )

    def followed_by(self, later: Blocks) -> Blocks:
        """These blocks and the later ones of the same chains."""
        return Blocks(
            {name: np.concatenate([mean, later.means[name]]) for name, mean in self.means.items()},
            {name: np.concatenate([count, later.counts[name]]) for name, count in self.counts.items()},
            np.concatenate([self.trace, later.trace], axis=1),
            np.concatenate([self.accepted, later.accepted], axis=1),
            np.concatenate([self.drift, later.drift], axis=1),
        )

    @classmethod
    def side_by_side(cls, parts: Sequence[Blocks]) -> Blocks:
        """The same blocks of further walkers, in the order of the parts."""
        first = parts[0]
        return cls(
            {name: np.concatenate([part.means[name] for part in parts], axis=1) for name in first.means},
            {name: np.concatenate([part.counts[name] for part in parts], axis=1) for name in first.counts},
            np.concatenate([part.trace for part in parts], axis=2),
            np.concatenate([part.accepted for part in parts], axis=2),
            np.max([part.drift for part in parts], axis=0),
        )


@dataclass(frozen=True, eq=False)
class Sampled(ABC):
    """One result file.

    Attributes
    ----------
    resolved : mapping
        The configuration with every default filled in.
    blocks : Blocks
    chains : list of ChainState
        Where each component's chain stands.
    seconds : float
        Wall time of production.
    complete : bool
        False when the run was interrupted before its last block.
    """

    resolved: Mapping[str, Any]
    blocks: Blocks
    chains: list[ChainState]
    seconds: float
    complete: bool

    @property
    @abstractmethod
    def sampled_states(self) -> Sequence[SampledState]:
        """The states that were sampled, one per component."""

    @property
    @abstractmethod
    def axes(self) -> Mapping[str, tuple[NDArray[Any], str]]:
        """Arrays that label axes of the stored data, each with its unit."""

    @property
    @abstractmethod
    def scaled_axes(self) -> Mapping[str, tuple[str, int]]:
        """Which of `axes` is the scale of which dataset (``means/NAME`` or ``counts/NAME``) along which axis."""

    @property
    @abstractmethod
    def energy(self) -> Estimate:
        """Energy per electron that ``sample`` states: of the infinite liquid, or of the droplet."""

    @abstractmethod
    def energy_surface(self, problem: Problem, variation: Variation) -> Surface:
        """Energy of every sample over the hole's metric.

        Raises
        ------
        ConfigError
            If there is no answer to the problem.
        """

    def statistical_error(self, quantity: str) -> float:
        """Standard error of the ``energy`` or of the ``stretch`` of the optimum; infinite where there is no optimum."""
        return self.energy.error if quantity == ENERGY else self._optimal_stretch.error

    @cached_property
    def _optimal_stretch(self) -> Estimate:
        keys = self.resolved["problem"]
        return find_minimum(self.energy_surface(problem_from(keys), variation_from(keys))).stretch

    @property
    def n_blocks(self) -> int:
        """Blocks that the file holds."""
        return int(self.blocks.drift.shape[1])

    @abstractmethod
    def state_summary(self) -> dict[str, Any]:
        """``state`` of the JSON output."""

    @cached_property
    def schedule(self) -> Schedule:
        """How the chains ran."""
        return schedule_from(self.resolved, self.sampled_states[0])

    @cached_property
    def time_in_measurements(self) -> float:
        """Integrated autocorrelation time of the energy in measurements; the slowest component's."""
        n_components, _, n_walkers, _ = self.blocks.trace.shape
        series = np.moveaxis(self.blocks.trace, 2, 1).reshape(n_components, n_walkers, -1)
        return float(np.nanmax([integrated_autocorrelation_time(x) for x in series] + [0.0])) or 1.0

    @property
    def autocorrelation_time(self) -> float:
        """The same in sweeps."""
        return self.time_in_measurements * self.schedule.sweeps_between

    def independent(self, blocks: NDArray[Any]) -> Array:
        """Independent samples of block means of shape (n_blocks, n_walkers, ...)."""
        return independent_samples(blocks, self.schedule.measurements_per_block / self.time_in_measurements)

    @property
    def effective_samples(self) -> float:
        """Independent energies in the whole run."""
        return self.blocks.trace.size / max(self.time_in_measurements, 1.0)

    @property
    @abstractmethod
    def rules(self) -> Mapping[str, float]:
        """What must come out exactly at any size, in standard errors of what was found."""

    @property
    def bulk_rules(self) -> Mapping[str, float]:
        """What must come out exactly in an infinite liquid; a cell too thin for it is no fault of the sampling."""
        return {}

    @cached_property
    def diagnostics(self) -> Diagnostics:
        """Whether the run may be trusted."""
        schedule, blocks = self.schedule, self.blocks
        planned = self.n_blocks if self.complete else ending_of(self.resolved["sampling"], schedule).most_blocks
        length = RunLength(schedule.sweeps_between, schedule.sweeps_per_block, planned)
        return diagnose(
            blocks.trace,
            blocks.accepted,
            blocks.drift,
            self.rules,
            self.time_in_measurements,
            length,
            missed_target(self),
        )

    @property
    def control_summary(self) -> Mapping[str, Any]:
        """What the diagnostics say of control variates; nothing where none were measured."""
        return {}

    def diagnostics_summary(self) -> dict[str, Any]:
        """``diagnostics`` of the JSON output."""
        return diagnostics_summary(self)

    @property
    def moves(self) -> int:
        """Proposals of the whole production so far."""
        schedule, state = self.schedule, self.sampled_states[0]
        sweeps = self.n_blocks * schedule.sweeps_per_block
        per_sweep = schedule.n_walkers * state.n_electrons * state.proposals_per_sweep
        return int(len(self.sampled_states) * sweeps * per_sweep)
