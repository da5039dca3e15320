"""What a block of moves leaves behind, whatever is measured."""

from __future__ import annotations

import threading
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from mcgeo.states.base import WalkerGroup

Array = NDArray[np.float64]


class Interrupted(Exception):
    """Raised inside a block when the run was asked to stop; the block is dropped."""


@dataclass(frozen=True)
class BlockRecord:
    """One block, walkers along the first axis.

    Attributes
    ----------
    means : mapping of name to ndarray, shape (n_walkers, ...)
        Averages over the block.
    counts : mapping of name to ndarray of int64, shape (n_walkers, n_bins)
        Histograms summed over the block.
    trace : ndarray, shape (n_walkers, n_measurements)
        One scalar per measurement, from which autocorrelation is judged.
    accepted : ndarray, shape (n_walkers,)
        Fraction of proposals accepted.
    drift : float
        Largest relative error of values stored between moves.
    """

    means: Mapping[str, Array]
    counts: Mapping[str, NDArray[np.int64]]
    trace: Array
    accepted: Array
    drift: float


class Measurement(Protocol):
    """The plan of what is measured on one state."""

    @property
    def shapes(self) -> Mapping[str, tuple[int, ...]]:
        """``means/NAME`` or ``counts/NAME`` -> shape per block and walker, of all that may be measured."""

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


def merged(records: list[BlockRecord], n_walkers: int) -> BlockRecord:
    """Records of all groups as one, without the walkers that only fill up the last group."""
    first = records[0]
    return BlockRecord(
        {name: np.concatenate([r.means[name] for r in records])[:n_walkers] for name in first.means},
        {name: np.concatenate([r.counts[name] for r in records])[:n_walkers] for name in first.counts},
        np.concatenate([r.trace for r in records])[:n_walkers],
        np.concatenate([r.accepted for r in records])[:n_walkers],
        max(r.drift for r in records),
    )
