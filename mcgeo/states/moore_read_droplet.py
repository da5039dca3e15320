"""The Moore-Read droplet: Psi = Pf(1/(z_i - z_j)) prod_{i<j} (z_i - z_j)^m exp(-sum |z_i|^2/4), G. Moore and N. Read,
Nucl. Phys. B 360, 362 (1991), in the isotropic coordinates of its metric."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.geometry.ellipse import NeutralisingEllipse
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.kernels.lanes import LANES, aligned_zeros
from mcgeo.kernels.laughlin_disk import log_weights
from mcgeo.kernels.moore_read_disk import advance, refresh_inverses
from mcgeo.states.base import Array
from mcgeo.states.droplet import uniform_in_disk
from mcgeo.states.liquids import MooreReadLiquid

_PROPOSALS_PER_VISIT = 3


class MooreReadDropletGroup:
    """Eight walkers with the inverses of their pairing matrices; see `mcgeo.states.base.WalkerGroup`."""

    def __init__(self, exponent: int, a: Array, b: Array, words: NDArray[np.uint64]) -> None:
        self.a, self.b, self.words = a, b, words
        self.accepted = np.zeros((1, LANES))
        self.log_determinants = np.empty(LANES)
        self._exponent = exponent
        n = len(a)
        n_blocks = (n + LANES - 1) // LANES
        self._along = aligned_zeros((2, LANES, n_blocks, LANES))
        self._inverse = aligned_zeros((2, LANES, n * n_blocks, LANES))
        self.refresh()

    def refresh(self) -> None:
        """Inverses from the positions, by elimination."""
        refresh_inverses(self.a, self.b, *self._along, *self._inverse, self.log_determinants)

    def advance(self, step: float, n_sweeps: int) -> None:
        """Sweeps with three proposals per visited electron: all but the first spare an update of the inverse."""
        advance(
            self._exponent, self.a, self.b, *self._along, *self._inverse, self.words, self.accepted,
            step, n_sweeps, _PROPOSALS_PER_VISIT,
        )  # fmt: skip

    def drift(self) -> float:
        """Largest error of the inverses in units of their largest entries."""
        kept = self._inverse.copy()
        self.refresh()
        error = np.abs(kept - self._inverse).max(axis=(0, 2, 3))
        return float(np.max(error / np.abs(self._inverse).max(axis=(0, 2, 3))))

    def forces(self) -> None:
        """Not derived in the plane."""


@dataclass(frozen=True)
class MooreReadDroplet(MooreReadLiquid):
    """Droplet of an even number of electrons at filling 1/``exponent``; see `mcgeo.states.droplet.DropletState`.

    Raises
    ------
    GeometryError
        If ``n_electrons`` is odd.
    """

    exponent: int
    n_electrons: int
    metric: UnimodularMetric = ISOTROPIC
    kind: str = "moore_read"
    proposals_per_sweep: int = _PROPOSALS_PER_VISIT
    best_acceptance: float = 0.4
    sweeps_per_measurement: int = 1
    cost_per_pair: float = 15.0

    def __post_init__(self) -> None:
        if self.n_electrons % 2:
            raise GeometryError(f"a paired state needs an even number of electrons, not {self.n_electrons}")

    @property
    def label(self) -> str:
        """Moore-Read droplet 1/m."""
        return f"Moore-Read droplet {self.filling}"

    @property
    def background(self) -> NeutralisingEllipse:
        """The neutralising charge."""
        return NeutralisingEllipse(self.n_electrons, self.filling, self.metric)

    @property
    def angular_momentum(self) -> int:
        """m N (N - 1)/2 - N/2: each of the N/2 pairs lowers the degree by one."""
        return (self.exponent * (self.n_electrons - 1) - 1) * self.n_electrons // 2

    @property
    def largest_orbital(self) -> int:
        """m (N - 1) - 1: every electron is paired."""
        return self.exponent * (self.n_electrons - 1) - 1

    @property
    def pair_momenta(self) -> range:
        """From m - 1, where the two are paired, to the degree in their two coordinates together."""
        return range(self.exponent - 1, self.exponent * (2 * self.n_electrons - 3), 2)

    @property
    def first_step(self) -> float:
        """Near the best side of a square proposal, in proportion to the distance of electrons."""
        return 3.5 * math.sqrt(self.exponent)

    @property
    def largest_step(self) -> float:
        """Diameter of the background."""
        return 2.0 * self.background.radius

    def start(self, rng: np.random.Generator) -> tuple[Array, Array]:
        """Positions of one walker, uniform over the background."""
        return uniform_in_disk(rng, self.n_electrons, self.background.radius)

    def group(self, a: Array, b: Array, words: NDArray[np.uint64]) -> MooreReadDropletGroup:
        """Eight walkers at the given positions."""
        return MooreReadDropletGroup(self.exponent, a, b, words)

    def log_weight(self, a: Array, b: Array) -> Array:
        """log |Pf|^2 + 2m sum_{i<j} log |z_i - z_j| - sum |z_i|^2/2, shape (8,)."""
        out = np.empty(LANES)
        a, b = np.ascontiguousarray(a), np.ascontiguousarray(b)
        log_weights(self.exponent, a, b, out)
        return out + self.group(a, b, np.zeros((4, LANES), dtype=np.uint64)).log_determinants
