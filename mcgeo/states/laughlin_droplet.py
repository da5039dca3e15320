"""The Laughlin droplet: Psi = prod_{i<j} (z_i - z_j)^m exp(-sum |z_i|^2/4), R. B. Laughlin, Phys. Rev. Lett. 50, 1395
(1983), in the isotropic coordinates of its metric."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.ellipse import NeutralisingEllipse
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.kernels.lanes import LANES
from mcgeo.kernels.laughlin_disk import advance, log_weights
from mcgeo.states.base import Array
from mcgeo.states.droplet import uniform_in_disk
from mcgeo.states.liquids import LaughlinLiquid

_PROPOSALS_PER_VISIT = 2


class LaughlinDropletGroup:
    """Eight walkers; see `mcgeo.states.base.WalkerGroup`. Nothing is stored between moves but the positions."""

    def __init__(self, exponent: int, a: Array, b: Array, words: NDArray[np.uint64]) -> None:
        self.a, self.b, self.words = a, b, words
        self.accepted = np.zeros((1, LANES))
        self._exponent = exponent

    def refresh(self) -> None:
        """Nothing to make anew: every move starts from the positions."""

    def advance(self, step: float, n_sweeps: int) -> None:
        """Sweeps with two proposals per visited electron."""
        advance(self._exponent, self.a, self.b, self.words, self.accepted, step, n_sweeps, _PROPOSALS_PER_VISIT)

    def drift(self) -> float:
        """Zero: no stored value can go astray."""
        return 0.0

    def forces(self) -> None:
        """Not derived in the plane."""


@dataclass(frozen=True)
class LaughlinDroplet(LaughlinLiquid):
    """Droplet of ``n_electrons`` at filling 1/``exponent``; see `mcgeo.states.droplet.DropletState`."""

    exponent: int
    n_electrons: int
    metric: UnimodularMetric = ISOTROPIC
    kind: str = "laughlin"
    proposals_per_sweep: int = _PROPOSALS_PER_VISIT
    best_acceptance: float = 0.38
    sweeps_per_measurement: int = 2
    cost_per_pair: float = 0.3

    @property
    def label(self) -> str:
        """Laughlin droplet 1/m."""
        return f"Laughlin droplet {self.filling}"

    @property
    def background(self) -> NeutralisingEllipse:
        """The neutralising charge."""
        return NeutralisingEllipse(self.n_electrons, self.filling, self.metric)

    @property
    def angular_momentum(self) -> int:
        """m N (N - 1)/2."""
        return self.exponent * self.n_electrons * (self.n_electrons - 1) // 2

    @property
    def largest_orbital(self) -> int:
        """m (N - 1)."""
        return self.exponent * (self.n_electrons - 1)

    @property
    def pair_momenta(self) -> range:
        """From m to the degree in the two coordinates together, m + 2m (N - 2)."""
        return range(self.exponent, self.exponent * (2 * self.n_electrons - 3) + 1, 2)

    @property
    def first_step(self) -> float:
        """Near the best side of a square proposal, in proportion to the distance of electrons."""
        return 3.0 * math.sqrt(self.exponent)

    @property
    def largest_step(self) -> float:
        """Diameter of the background."""
        return 2.0 * self.background.radius

    def start(self, rng: np.random.Generator) -> tuple[Array, Array]:
        """Positions of one walker, uniform over the background."""
        return uniform_in_disk(rng, self.n_electrons, self.background.radius)

    def group(self, a: Array, b: Array, words: NDArray[np.uint64]) -> LaughlinDropletGroup:
        """Eight walkers at the given positions."""
        return LaughlinDropletGroup(self.exponent, a, b, words)

    def log_weight(self, a: Array, b: Array) -> Array:
        """2m sum_{i<j} log |z_i - z_j| - sum |z_i|^2/2, shape (8,)."""
        out = np.empty(LANES)
        log_weights(self.exponent, np.ascontiguousarray(a), np.ascontiguousarray(b), out)
        return out
