"""The Laughlin state 1/m on the torus.

Psi = prod_{i<j} theta_1(pi z_ij / L1 | tau)^m times a centre-of-mass factor (Haldane and Rezayi, Phys. Rev. B 31, 2529
(1985)): m = 1 the filled level, odd m fermions, even m bosons.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.frame import TorusFrame
from mcgeo.kernels.lanes import LANES, aligned_zeros
from mcgeo.kernels.laughlin_forces import laughlin_forces
from mcgeo.kernels.laughlin_torus import (
    LARGEST_IMAGINARY_TAU,
    LaughlinTorusTables,
    advance,
    laughlin_torus_tables,
    log_weights,
    refresh_phases,
)
from mcgeo.states.base import Array, OnTorus
from mcgeo.states.liquids import LaughlinLiquid

_PROPOSALS_PER_VISIT = 2


class LaughlinGroup:
    """Eight Laughlin walkers; see `mcgeo.states.base.WalkerGroup`."""

    def __init__(self, tables: LaughlinTorusTables, a: Array, b: Array, words: NDArray[np.uint64]) -> None:
        self.a, self.b, self.words = a, b, words
        self.accepted = np.zeros((1, LANES))
        self._tables = tables
        self._phases = aligned_zeros((2 * len(a), LANES))
        self._sums = aligned_zeros((4 * len(tables.far) + 1, LANES))
        self.refresh()

    def refresh(self) -> None:
        """Phases and power sums from the positions."""
        refresh_phases(self._tables, self.a, self.b, self._phases, self._sums)

    def advance(self, step: float, n_sweeps: int) -> None:
        """Sweeps with two proposals per visited electron."""
        advance(
            self._tables, self.a, self.b, self._phases, self._sums, self.words, self.accepted,
            step, n_sweeps, _PROPOSALS_PER_VISIT,
        )  # fmt: skip

    def drift(self) -> float:
        """Relative error of the power sums, weighted as they enter the far images."""
        kept = self._sums.copy()
        self.refresh()
        scale = np.maximum(np.abs(self._sums).max(axis=0), 1.0)
        return float(np.max(np.abs(kept - self._sums) / scale))

    def forces(self) -> Array:
        """Gradient of log |Psi|^2, from the stored phases."""
        forces = np.empty((2 * len(self.a), LANES))
        laughlin_forces(self._tables, self.b, self._phases, self._sums, forces)
        return forces


@dataclass(frozen=True, eq=False)
class Laughlin(LaughlinLiquid, OnTorus):
    """Laughlin 1/m of ``n_electrons`` on ``frame``; see `mcgeo.states.base.TrialState`.

    Raises
    ------
    GeometryError
        If the cell is too elongated.
    """

    exponent: int
    n_electrons: int
    frame: TorusFrame
    kind: str = "laughlin"
    proposals_per_sweep: int = _PROPOSALS_PER_VISIT
    best_acceptance: float = 0.38
    sweeps_per_measurement: int = 4
    cost_per_pair: float = 1.0
    _tables: LaughlinTorusTables = field(init=False, repr=False)

    def __post_init__(self) -> None:
        self.frame.require_tau_below(LARGEST_IMAGINARY_TAU)
        cell = self.frame.isotropic
        object.__setattr__(self, "_tables", laughlin_torus_tables(self.exponent, cell.tau, cell.side))

    @property
    def label(self) -> str:
        """Laughlin 1/m."""
        return f"Laughlin {self.filling}"

    @property
    def shift(self) -> int:
        """m (Wen and Zee, Phys. Rev. Lett. 69, 953 (1992))."""
        return self.exponent

    @property
    def first_occupied(self) -> int:
        """Pairs have relative angular momentum m at least."""
        return self.exponent

    @property
    def first_step(self) -> float:
        """Near the best side of a square proposal at m = 3, scaled with the distance of electrons."""
        return 3.0 * math.sqrt(self.exponent)

    def group(self, a: Array, b: Array, words: NDArray[np.uint64]) -> LaughlinGroup:
        """Eight walkers at the given fractions."""
        return LaughlinGroup(self._tables, a, b, words)

    def log_weight(self, a: Array, b: Array) -> Array:
        """2m sum_{i<j} log |s(z_i - z_j)| up to a constant, shape (8,)."""
        out = np.empty(LANES)
        log_weights(self._tables, np.ascontiguousarray(a), np.ascontiguousarray(b), out)
        return out
