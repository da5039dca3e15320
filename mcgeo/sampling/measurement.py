"""What is measured on the torus while walkers run: |rho_q|^2, pair distances, control variates, one scalar trace."""

from __future__ import annotations

import threading
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.cell import Waves
from mcgeo.kernels.density_controls import DensityTables, add_density_controls, density_scratch, density_tables
from mcgeo.kernels.lanes import LANES
from mcgeo.kernels.pair_histogram import add_pair_counts
from mcgeo.kernels.stein import POWERS, SteinTables, add_controls, stein_tables
from mcgeo.kernels.structure import WaveTables, add_structure_factor, wave_sums, wave_tables
from mcgeo.sampling.blocks import BlockRecord
from mcgeo.sampling.stopping import advance, sweeps_per_look
from mcgeo.states.base import TrialState, WalkerGroup

Array = NDArray[np.float64]

STRUCTURE, CONTROLS, PAIRS = "structure", "controls", "pairs"
BIN_WIDTH = 0.1
# Pair distances are a second look at what |rho_q|^2 already holds; they need not be taken every time.
_MEASUREMENTS_PER_HISTOGRAM = 16


def configurations_counted(n_measurements: int) -> int:
    """Number of configurations in the pair counts of a block of measurements."""
    return -(-n_measurements // _MEASUREMENTS_PER_HISTOGRAM)


@dataclass(frozen=True, eq=False)
class TorusMeasurement:
    """Plan of the measurements of one state; built by `torus_measurement`."""

    state: TrialState
    waves: Waves
    tables: WaveTables
    trace_weights: Array
    n_bins: int
    stein: SteinTables
    densities: DensityTables

    @property
    def shapes(self) -> dict[str, tuple[int, ...]]:
        """See `mcgeo.sampling.blocks.Measurement`."""
        return {
            f"means/{STRUCTURE}": (len(self.waves.integers),),
            f"means/{CONTROLS}": (self.stein.n_controls + self.densities.n_controls,),
            f"counts/{PAIRS}": (self.n_bins,),
        }

    def block(
        self, group: WalkerGroup, step: float, n_measurements: int, sweeps_between: int, stop: threading.Event
    ) -> BlockRecord:
        """Run one block of one group; see `mcgeo.sampling.blocks.Measurement`.

        Means: ``structure``, S(q) = |rho_q|^2 / N, shape (n_walkers, n_waves); ``controls``, of mean zero, at the same
        configurations where the state has forces, shape (n_walkers, n_controls), those of Gaussians of the pair
        distance before those of densities. Counts: ``pairs``, pair distances in bins of `BIN_WIDTH` l_B, summed over
        `configurations_counted`, shape (n_walkers, n_bins). Trace: the weighted sum of S(q).

        Raises
        ------
        Interrupted
            When ``stop`` is set.
        """
        n = self.state.n_electrons
        cell = self.state.frame.isotropic
        sums = wave_sums(self.tables, self.trace_weights / n, n)
        counts = np.zeros((self.n_bins, LANES), dtype=np.int64)
        gaussians = np.zeros((len(POWERS), LANES))
        densities = np.zeros((self.densities.n_controls, LANES))
        scratch = density_scratch(self.densities, n)
        trace = np.empty((n_measurements, LANES))
        forces = None
        longest = sweeps_per_look(self.state)
        group.refresh()
        group.accepted[:] = 0.0
        for k in range(n_measurements):
            advance(group, step, sweeps_between, longest, stop)
            sums.scalar[:] = 0.0
            add_structure_factor(self.tables, group.a, group.b, sums)
            trace[k] = sums.scalar[0]
            forces = group.forces()
            if forces is not None:
                add_controls(self.stein, group.a, group.b, forces, gaussians)
                add_density_controls(self.densities, group.a, group.b, forces, scratch, densities)
            if k % _MEASUREMENTS_PER_HISTOGRAM == 0:
                add_pair_counts(
                    group.a, group.b, cell.tau.real, cell.tau.imag, cell.side, BIN_WIDTH, counts
                )
        proposals = n_measurements * sweeps_between * n * self.state.proposals_per_sweep
        means = {STRUCTURE: sums.total.T / (n * n_measurements)}
        if forces is not None:
            controls = np.concatenate([gaussians[: self.stein.n_controls], densities])
            means[CONTROLS] = controls.T / n_measurements
        return BlockRecord(
            means,
            {PAIRS: counts.T.copy()},
            trace.T.copy(),
            group.accepted[0] / proposals,
            group.drift(),
        )


def torus_measurement(state: TrialState, waves: Waves, trace_weights: Array) -> TorusMeasurement:
    """Plan for the waves of `TorusFrame.waves`; ``trace_weights`` (shape (n_waves,)) define the scalar trace."""
    cell = state.frame.isotropic
    tables = wave_tables(waves.integers, cell.tau.real)
    n_bins = int(cell.largest_radius / BIN_WIDTH)
    stein = stein_tables(cell.tau, cell.side, state.n_electrons)
    densities = density_tables(cell.tau, cell.side, state.n_electrons)
    return TorusMeasurement(state, waves, tables, np.asarray(trace_weights, dtype=float), n_bins, stein, densities)
