"""What is measured in a droplet while walkers run: Coulomb sums, second moments, histograms, one trace."""

from __future__ import annotations

import threading
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.ellipse import stretch_factor
from mcgeo.kernels.droplet_counts import (
    add_pair_counts,
    add_radial_counts,
    add_second_moments,
    coulomb_sums,
)
from mcgeo.kernels.lanes import LANES
from mcgeo.sampling.blocks import BlockRecord
from mcgeo.sampling.stopping import advance, sweeps_per_look
from mcgeo.states.base import WalkerGroup
from mcgeo.states.droplet import DropletState

Array = NDArray[np.float64]

ELECTRON_ELECTRON, ELECTRON_ELECTRON_LAB = "electron_electron", "electron_electron_lab"
ELECTRON_BACKGROUND, SECOND_MOMENTS = "electron_background", "second_moments"
RADIAL, PAIRS = "radial", "pairs"
RADIAL_BIN_WIDTH, PAIR_BIN_WIDTH = 0.1, 0.2
# Counting all pairs costs about as much as the sweeps between two measurements.
_MEASUREMENTS_PER_HISTOGRAM = 2
# Beyond the edge the density falls as exp(-(r' - R)^2/2) and faster; the last bin takes what is left.
_MARGIN = 6.0


def configurations_counted(n_measurements: int) -> int:
    """Number of configurations in the pair counts of a block of measurements."""
    return -(-n_measurements // _MEASUREMENTS_PER_HISTOGRAM)


@dataclass(frozen=True, eq=False)
class DropletMeasurement:
    """Plan of the measurements of one droplet.

    Of every configuration the Coulomb energy is taken twice. In a state that is rotation symmetric in r' the mean
    of 1/|r| is f times that of 1/|r'|, f = `stretch_factor`, and the same holds for the background: sums over r'
    are averages over all directions of the droplet, with less noise than the sum over the pairs as they lie in the
    lab, where electrons and background do not fluctuate together. The latter is kept as a check.
    """

    state: DropletState

    @property
    def n_bins(self) -> int:
        """Number of radial bins."""
        return int((self.state.background.radius + _MARGIN) / RADIAL_BIN_WIDTH)

    @property
    def n_pair_bins(self) -> int:
        """Number of bins of pair distances."""
        return int((2.0 * self.state.background.radius + _MARGIN) / PAIR_BIN_WIDTH)

    @property
    def shapes(self) -> dict[str, tuple[int, ...]]:
        """See `mcgeo.sampling.blocks.Measurement`."""
        energies = (ELECTRON_ELECTRON, ELECTRON_ELECTRON_LAB, ELECTRON_BACKGROUND)
        return {
            **{f"means/{name}": () for name in energies},
            f"means/{SECOND_MOMENTS}": (3,),
            f"counts/{RADIAL}": (self.n_bins,),
            f"counts/{PAIRS}": (self.n_pair_bins,),
        }

    def block(
        self, group: WalkerGroup, step: float, n_measurements: int, sweeps_between: int, stop: threading.Event
    ) -> BlockRecord:
        """Run one block of one group; see `mcgeo.sampling.blocks.Measurement`.

        Means, energies being totals of all electrons: ``electron_electron``, f sum_{i<j} 1/|r'_ij|;
        ``electron_electron_lab``, sum_{i<j} 1/|r_ij|; ``electron_background``, each of shape (n_walkers,);
        ``second_moments``, <x^2>, <y^2>, <xy> per electron in the lab, shape (n_walkers, 3). Counts: ``radial``,
        electrons by r' in bins of `RADIAL_BIN_WIDTH` l_B; ``pairs``, pairs by |r'_ij| in bins of `PAIR_BIN_WIDTH` l_B,
        over `configurations_counted`; the last bin takes all that lie beyond. Trace: total energy per electron.

        Raises
        ------
        Interrupted
            When ``stop`` is set.
        """
        n, background = self.state.n_electrons, self.state.background
        inverse_metric = self.state.metric.inverse_matrix
        sums = np.empty((n_measurements, 3, LANES))
        moments = np.zeros((3, LANES))
        counts = np.zeros((self.n_bins, LANES), dtype=np.int64)
        pairs = np.zeros((self.n_pair_bins, LANES), dtype=np.int64)
        longest = sweeps_per_look(self.state)
        group.refresh()
        group.accepted[:] = 0.0
        for k in range(n_measurements):
            advance(group, step, sweeps_between, longest, stop)
            coulomb_sums(group.a, group.b, inverse_metric, background.radius, sums[k])
            add_second_moments(group.a, group.b, moments)
            add_radial_counts(group.a, group.b, RADIAL_BIN_WIDTH, counts)
            if k % _MEASUREMENTS_PER_HISTOGRAM == 0:
                add_pair_counts(group.a, group.b, PAIR_BIN_WIDTH, pairs)
        electron_electron = stretch_factor(self.state.metric) * sums[:, 0]
        electron_background = background.potential_scale * sums[:, 2]
        total = electron_electron + electron_background + background.self_energy
        proposals = n_measurements * sweeps_between * n * self.state.proposals_per_sweep
        return BlockRecord(
            {
                ELECTRON_ELECTRON: electron_electron.mean(axis=0),
                ELECTRON_ELECTRON_LAB: sums[:, 1].mean(axis=0),
                ELECTRON_BACKGROUND: electron_background.mean(axis=0),
                SECOND_MOMENTS: self._in_lab(moments / (n * n_measurements)),
            },
            {RADIAL: counts.T.copy(), PAIRS: pairs.T.copy()},
            total.T / n,
            group.accepted[0] / proposals,
            group.drift(),
        )

    def _in_lab(self, moments: Array) -> Array:
        """S^-1 <r' r'^T> S^-1 as <x^2>, <y^2>, <xy>, shape (8, 3)."""
        xx, yy, xy = moments
        back = self.state.metric.inverse_linear_map
        # What is no number is found when the block is looked at, with its walker.
        with np.errstate(invalid="ignore"):
            tensor = back @ np.array([[xx, xy], [xy, yy]]).transpose(2, 0, 1) @ back
        return np.stack([tensor[:, 0, 0], tensor[:, 1, 1], tensor[:, 0, 1]], axis=1)
