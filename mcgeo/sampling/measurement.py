"""What is measured on the torus while walkers run: |rho_q|^2, pair distances, and one scalar trace."""

from __future__ import annotations

import threading
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.cell import Waves
from mcgeo.kernels.lanes import LANES
from mcgeo.kernels.pair_histogram import add_pair_counts
from mcgeo.kernels.structure import WaveTables, add_structure_factor, wave_sums, wave_tables
from mcgeo.states.base import TrialState, WalkerGroup

Array = NDArray[np.float64]

BIN_WIDTH = 0.1
# Pair distances are a second look at what |rho_q|^2 already holds; they need not be taken every time.
_MEASUREMENTS_PER_HISTOGRAM = 4


def configurations_counted(n_measurements: int) -> int:
    """Number of configurations in the pair counts of a block of measurements."""
    return -(-n_measurements // _MEASUREMENTS_PER_HISTOGRAM)


class Interrupted(Exception):
    """Raised inside a block when the run was asked to stop; the block is dropped."""


@dataclass(frozen=True)
class BlockRecord:
    """Means over one block, walkers along the first axis.

    Attributes
    ----------
    structure : ndarray, shape (n_walkers, n_waves)
        S(q) = |rho_q|^2 / N.
    pair_counts : ndarray of int64, shape (n_walkers, n_bins)
        Pair distances in bins of `BIN_WIDTH` l_B, summed over `configurations_counted`.
    trace : ndarray, shape (n_walkers, n_measurements)
        The weighted sum of S(q), one value per measurement.
    accepted : ndarray, shape (n_walkers,)
        Fraction of proposals accepted.
    drift : float
        Largest relative error of values stored between moves.
    """

    structure: Array
    pair_counts: NDArray[np.int64]
    trace: Array
    accepted: Array
    drift: float


@dataclass(frozen=True, eq=False)
class TorusMeasurement:
    """Plan of the measurements of one state; built by `torus_measurement`."""

    state: TrialState
    waves: Waves
    tables: WaveTables
    trace_weights: Array
    n_bins: int

    def block(
        self, group: WalkerGroup, step: float, n_measurements: int, sweeps_between: int, stop: threading.Event
    ) -> BlockRecord:
        """Run one block of one group.

        Stored values are made anew at the start, so a run continued from the block's positions is the same
        to the last bit.

        Raises
        ------
        Interrupted
            When ``stop`` is set.
        """
        n = self.state.n_electrons
        cell = self.state.frame.isotropic
        sums = wave_sums(self.tables, self.trace_weights / n, n)
        counts = np.zeros((self.n_bins, LANES), dtype=np.int64)
        trace = np.empty((n_measurements, LANES))
        group.refresh()
        group.accepted[:] = 0.0
        for k in range(n_measurements):
            if stop.is_set():
                raise Interrupted
            group.advance(step, sweeps_between)
            sums.scalar[:] = 0.0
            add_structure_factor(self.tables, group.a, group.b, sums)
            trace[k] = sums.scalar[0]
            if k % _MEASUREMENTS_PER_HISTOGRAM == 0:
                add_pair_counts(
                    group.a, group.b, cell.tau.real, cell.tau.imag, cell.side, BIN_WIDTH, counts
                )
        proposals = n_measurements * sweeps_between * n * self.state.proposals_per_sweep
        return BlockRecord(
            sums.total.T / (n * n_measurements),
            counts.T.copy(),
            trace.T.copy(),
            group.accepted[0] / proposals,
            group.drift(),
        )


def torus_measurement(state: TrialState, waves: Waves, trace_weights: Array) -> TorusMeasurement:
    """Plan for the waves of `TorusFrame.waves`; ``trace_weights`` (shape (n_waves,)) define the scalar trace."""
    cell = state.frame.isotropic
    tables = wave_tables(waves.integers, cell.tau.real)
    n_bins = int(cell.largest_radius / BIN_WIDTH)
    return TorusMeasurement(state, waves, tables, np.asarray(trace_weights, dtype=float), n_bins)


def merged(records: list[BlockRecord], n_walkers: int) -> BlockRecord:
    """Records of all groups as one, without the walkers that only fill up the last group."""
    return BlockRecord(
        np.concatenate([record.structure for record in records])[:n_walkers],
        np.concatenate([record.pair_counts for record in records])[:n_walkers],
        np.concatenate([record.trace for record in records])[:n_walkers],
        np.concatenate([record.accepted for record in records])[:n_walkers],
        max(record.drift for record in records),
    )
