"""What a trial state supplies; nothing else in the program knows which state it is."""

from __future__ import annotations

from fractions import Fraction
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.frame import TorusFrame

Array = NDArray[np.float64]

FERMIONS = "fermions"
BOSONS = "bosons"


class WalkerGroup(Protocol):
    """Eight walkers side by side with all that their kernel keeps between moves.

    ``a``, ``b`` (shape (n_electrons, 8): fractions of the isotropic cell, or coordinates in the plane) and ``words``
    (shape (4, 8), the generators)
    are all that is needed to continue; everything else is made again by `refresh`.
    """

    a: Array
    b: Array
    words: NDArray[np.uint64]
    accepted: Array

    def refresh(self) -> None:
        """Make all stored intermediate values anew from the positions."""

    def advance(self, step: float, n_sweeps: int) -> None:
        """Make ``n_sweeps`` sweeps with square proposals of side ``step``; adds to ``accepted``, shape (1, 8)."""

    def drift(self) -> float:
        """Largest relative error that the stored values have gathered since the last `refresh`."""

    def forces(self) -> Array | None:
        """Gradient of log |Psi|^2 in isotropic coordinates with x along L1, in 1/l_B; None where it is not derived.

        Shape (2 n_electrons, 8): rows 2i and 2i + 1 hold the derivatives by x_i and y_i.
        """


class SampledState(Protocol):
    """What sampling needs of a state: a lowest-level trial state, isotropic in its own metric."""

    @property
    def kind(self) -> str:
        """Its key in the configuration."""

    @property
    def label(self) -> str:
        """Words for reports and figures."""

    @property
    def filling(self) -> Fraction:
        """Electrons per flux quantum."""

    @property
    def statistics(self) -> str:
        """``fermions`` or ``bosons``."""

    @property
    def n_electrons(self) -> int:
        """Number of electrons."""

    @property
    def proposals_per_sweep(self) -> int:
        """Proposals per electron and sweep."""

    @property
    def best_acceptance(self) -> float:
        """Where to tune the step to."""

    @property
    def first_step(self) -> float:
        """Where to start the tuning, side of the square proposal in l_B."""

    @property
    def largest_step(self) -> float:
        """Bound on the side of the square proposal in l_B."""

    @property
    def sweeps_per_measurement(self) -> int:
        """Default distance of two measurements."""

    @property
    def cost_per_pair(self) -> float:
        """Rough time of a proposal per other electron, in units of a Laughlin pair factor."""

    def start(self, rng: np.random.Generator) -> tuple[Array, Array]:
        """First positions of one walker, two arrays of shape (n_electrons,)."""

    def group(self, a: Array, b: Array, words: NDArray[np.uint64]) -> WalkerGroup:
        """Eight walkers at the given positions; the arrays are taken over."""

    def log_weight(self, a: Array, b: Array) -> Array:
        """log |Psi|^2 up to a constant at positions of shape (n_electrons, 8), recomputed from scratch; shape (8,)."""


class TrialState(SampledState, Protocol):
    """A trial state on a torus."""

    @property
    def frame(self) -> TorusFrame:
        """Cell and metric."""

    @property
    def shift(self) -> int | None:
        """s in S(q) = q^2/2 + (s - 2) q^4/8 + ..., None for a gapless liquid (no q^4 rule)."""

    @property
    def first_occupied(self) -> int:
        """Pair occupations n_m vanish exactly for m below this."""


class OnTorus:
    """What every state on a torus shares: inherit from it."""

    n_electrons: int
    frame: TorusFrame

    @property
    def largest_step(self) -> float:
        """The cell's side: a larger step only wraps."""
        return self.frame.isotropic.side

    def start(self, rng: np.random.Generator) -> tuple[Array, Array]:
        """Uniformly random fractions of the cell."""
        a, b = rng.random((2, self.n_electrons)) - 0.5
        return a, b
