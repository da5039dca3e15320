"""The Moore-Read state on the torus.

Psi = Pf[theta_a(v_ij)/theta_1(v_ij)] prod_{i<j} theta_1(v_ij)^m, v_ij = pi (z_i - z_j)/L1, times a centre-of-mass
factor (Moore and Read, Nucl. Phys. B 360, 362 (1991); on the torus Greiter, Wen and Wilczek, Nucl. Phys. B 374, 567
(1992)): m = 1 bosons at filling 1, m = 2 fermions at filling 1/2, an even number of particles.

The sectors 1, 2, 3 are a = 2, 3, 4. Taking one electron once around a side of the cell multiplies the Pfaffian by

    sector   around L1   around L2
       1         +1          -1
       2         -1          -1
       3         -1          +1

The sides are those of the reduced isotropic cell, `TorusFrame.isotropic` (and the same combinations of lab vectors,
`TorusFrame.lab`). Another basis permutes the sectors; their average does not depend on it. On a square cell 1 and 3
are related by a quarter turn, on a hexagonal one all three by turns of 60 degrees.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.geometry.frame import TorusFrame
from mcgeo.kernels.lanes import LANES
from mcgeo.kernels.moore_read_forces import moore_read_forces
from mcgeo.kernels.moore_read_inverses import log_weights, moore_read_storage, refresh
from mcgeo.kernels.moore_read_pairs import (
    LARGEST_IMAGINARY_TAU,
    MooreReadTorusTables,
    moore_read_torus_tables,
)
from mcgeo.kernels.moore_read_torus import advance
from mcgeo.states.base import Array, OnTorus
from mcgeo.states.liquids import MooreReadLiquid


class MooreReadGroup:
    """Eight Moore-Read walkers; see `mcgeo.states.base.WalkerGroup`."""

    def __init__(
        self, tables: MooreReadTorusTables, proposals: int, a: Array, b: Array, words: NDArray[np.uint64]
    ) -> None:
        self.a, self.b, self.words = a, b, words
        self.accepted = np.zeros((1, LANES))
        self._tables, self._proposals = tables, proposals
        self._storage = moore_read_storage(len(a))
        self.refresh()

    def refresh(self) -> None:
        """Phases, sums and inverse matrices from the positions."""
        refresh(self._tables, self.a, self.b, self._storage)

    def advance(self, step: float, n_sweeps: int) -> None:
        """Sweeps with several proposals per visited electron."""
        advance(
            self._tables, self.a, self.b, self._storage, self.words, self.accepted, step, n_sweeps, self._proposals
        )  # fmt: skip

    def drift(self) -> float:
        """Largest error of an inverse matrix in units of its largest entry."""
        kept = self._storage.inverses.copy()
        self.refresh()
        made = self._storage.inverses
        return float(np.max(np.abs(kept - made).max(axis=(1, 2, 3)) / np.abs(made).max(axis=(1, 2, 3))))

    def forces(self) -> Array:
        """Gradient of log |Psi|^2, from the stored phases and inverse matrices."""
        forces = np.empty((2 * len(self.a), LANES))
        moore_read_forces(self._tables, self.b, self._storage, forces)
        return forces


@dataclass(frozen=True, eq=False)
class MooreRead(MooreReadLiquid, OnTorus):
    """Moore-Read state at filling 1/m of ``n_electrons`` on ``frame``; see `mcgeo.states.base.TrialState`.

    Parameters
    ----------
    exponent : int
        m.
    n_electrons : int
        Even.
    frame : TorusFrame
    sector : int
        1, 2 or 3; see the module.

    Raises
    ------
    GeometryError
        If the cell is too elongated, or the number of electrons odd.
    """

    exponent: int
    n_electrons: int
    frame: TorusFrame
    sector: int
    kind: str = "moore_read"
    proposals_per_sweep: int = 3
    best_acceptance: float = 0.35
    sweeps_per_measurement: int = 1
    cost_per_pair: float = 15.0
    _tables: MooreReadTorusTables = field(init=False, repr=False)

    def __post_init__(self) -> None:
        if self.n_electrons % 2:
            raise GeometryError(f"a Moore-Read state pairs an even number of electrons, not {self.n_electrons}")
        self.frame.require_tau_below(LARGEST_IMAGINARY_TAU)
        cell = self.frame.isotropic
        tables = moore_read_torus_tables(self.exponent, self.sector, cell.tau, cell.side)
        object.__setattr__(self, "_tables", tables)

    @property
    def label(self) -> str:
        """Moore-Read 1/m; the sector is in the state's keys."""
        return f"Moore-Read {self.filling}"

    @property
    def shift(self) -> int:
        """m + 1 (Wen and Zee, Phys. Rev. Lett. 69, 953 (1992))."""
        return self.exponent + 1

    @property
    def first_occupied(self) -> int:
        """m - 1: the pole of the Pfaffian takes one power from the Jastrow factor."""
        return self.exponent - 1

    @property
    def first_step(self) -> float:
        """Scaled with the distance of electrons."""
        return 4.5 * math.sqrt(self.exponent)

    def group(self, a: Array, b: Array, words: NDArray[np.uint64]) -> MooreReadGroup:
        """Eight walkers at the given fractions."""
        return MooreReadGroup(self._tables, self.proposals_per_sweep, a, b, words)

    def log_weight(self, a: Array, b: Array) -> Array:
        """log |Psi|^2 up to a constant, shape (8,)."""
        out = np.empty(LANES)
        storage = moore_read_storage(self.n_electrons)
        log_weights(self._tables, np.ascontiguousarray(a), np.ascontiguousarray(b), storage, out)
        return out
