"""The composite-fermion sea at filling 1/m, m = 2 or 4, on the torus.

Psi = det M prod_{i<j} theta_1(pi z_ij / L1 | tau)^(m-2) times a centre-of-mass factor (Rezayi and Read, Phys. Rev.
Lett. 72, 900 (1994); Shao, Kim, Haldane and Rezayi, Phys. Rev. Lett. 114, 206402 (2015));
`mcgeo.kernels.fermi_sea_torus` has the matrix M.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.geometry.cell import lattice_points
from mcgeo.geometry.frame import TorusFrame
from mcgeo.kernels.fermi_sea_forces import fermi_sea_forces
from mcgeo.kernels.fermi_sea_moves import fermi_sea_store, log_weights, refresh, sweep
from mcgeo.kernels.fermi_sea_torus import FermiSeaTables, fermi_sea_tables, largest_imaginary_tau
from mcgeo.kernels.lanes import LANES
from mcgeo.states.base import FERMIONS, Array, OnTorus

Points = NDArray[np.int64]

_PROPOSALS_PER_VISIT = 2
# A matrix kept by products alone gathers a few units in the last place per move; 64 sweeps stay below 1e-9.
_SWEEPS_PER_REFRESH = 64
_SHELL_TOLERANCE = 1e-9
_NUMBERS_LISTED = 4


def shells_of_points(tau: complex, n_least: int) -> list[Points]:
    """Points (p, s) of the lattice p + s tau in shells of equal distance from the origin, ``n_least`` points or more.

    Distances are equal within a relative 1e-9. Every shell is complete and in lexicographic order.
    """
    basis = np.array([[1.0, 0.0], [tau.real, tau.imag]])
    # A disk of area (n + 1) Im(tau) holds about n + 1 points; the margin of one cell diagonal makes it certain.
    reach = math.sqrt((n_least + 1) * tau.imag / math.pi) + abs(1.0 + abs(tau))
    found = np.concatenate([np.zeros((1, 2)), lattice_points(basis, reach)])
    integers = np.rint(found @ np.linalg.inv(basis)).astype(np.int64)
    norm = np.abs(integers[:, 0] + integers[:, 1] * tau)
    order = np.argsort(norm)
    breaks = np.flatnonzero(np.diff(norm[order]) > _SHELL_TOLERANCE * norm[order][1:]) + 1
    shells = [integers[shell] for shell in np.split(order, breaks)]
    # The outermost shell may be cut by the disk.
    return [shell[np.lexsort((shell[:, 1], shell[:, 0]))] for shell in shells[:-1]]


def closed_sea(tau: complex, n_electrons: int) -> Points:
    """The ``n_electrons`` points of the lattice p + s tau nearest to the origin, shape (n_electrons, 2).

    Raises
    ------
    GeometryError
        If they do not fill whole shells; the message lists numbers that do.
    """
    shells = shells_of_points(tau, 2 * n_electrons + 16)
    closed = np.cumsum([len(shell) for shell in shells])
    if n_electrons not in closed:
        position = int(np.searchsorted(closed, n_electrons))
        near = closed[max(0, position - _NUMBERS_LISTED) : position + _NUMBERS_LISTED]
        raise GeometryError(
            f"{n_electrons} electrons do not close a shell of the composite-fermion sea: in this cell, seen in the "
            f"state's own metric (tau = {tau.real:.6g} + {tau.imag:.6g}i), {', '.join(map(str, near))} do; "
            "choose one of these or give the points"
        )
    return np.concatenate(shells[: int(np.searchsorted(closed, n_electrons)) + 1])


def checked_points(points: Sequence[Sequence[int]], n_electrons: int) -> Points:
    """Explicit points as an array of shape (n_electrons, 2).

    Raises
    ------
    GeometryError
        If there are not ``n_electrons`` different ones, or one lies N/2 or more from their mean in p or s: p and s
        count modulo N up to the centre of mass, so a wider sea would be another one in disguise, or vanish.
    """
    sea = np.asarray(points, dtype=np.int64).reshape(-1, 2)
    if len(sea) != n_electrons or len(np.unique(sea, axis=0)) != n_electrons:
        raise GeometryError(
            f"a sea of {n_electrons} electrons needs {n_electrons} different points, not {sea.tolist()}"
        )
    if n_electrons > 1 and np.max(np.abs(sea - sea.mean(axis=0))) >= n_electrons / 2:
        raise GeometryError(
            f"the points of a sea of {n_electrons} electrons must lie within {n_electrons / 2:g} of their mean in p "
            f"and s (both count modulo {n_electrons}), not {sea.tolist()}"
        )
    return sea


class FermiSeaGroup:
    """Eight walkers of a composite-fermion sea; see `mcgeo.states.base.WalkerGroup`."""

    def __init__(self, tables: FermiSeaTables, a: Array, b: Array, words: NDArray[np.uint64]) -> None:
        self.a, self.b, self.words = a, b, words
        self.accepted = np.zeros((1, LANES))
        self._tables = tables
        self._kept = fermi_sea_store(len(a))
        self._sweeps_since_refresh = 0
        self.refresh()

    def refresh(self) -> None:
        """Phases, matrices and determinants from the positions."""
        refresh(self._tables, self.a, self.b, self._kept)
        self._sweeps_since_refresh = 0

    def advance(self, step: float, n_sweeps: int) -> None:
        """Sweeps with two proposals per visited electron; the matrices are made anew every 64 sweeps."""
        for _ in range(n_sweeps):
            if self._sweeps_since_refresh == _SWEEPS_PER_REFRESH:
                self.refresh()
            sweep(self._tables, self.a, self.b, self._kept, self.words, self.accepted, step, _PROPOSALS_PER_VISIT)
            self._sweeps_since_refresh += 1

    def drift(self) -> float:
        """Relative error of |det M| kept by products."""
        kept = self._kept.log_det.copy()
        self.refresh()
        return float(np.max(np.abs(kept - self._kept.log_det)))

    def forces(self) -> Array:
        """Gradient of log |Psi|^2, from the stored matrices."""
        forces = np.empty((2 * len(self.a), LANES))
        fermi_sea_forces(self._tables, self.b, self._kept, forces)
        return forces


@dataclass(frozen=True, eq=False)
class FermiSea(OnTorus):
    """Composite-fermion sea at 1/``exponent`` of ``n_electrons`` on ``frame``; see `mcgeo.states.base.TrialState`.

    Parameters
    ----------
    exponent : int
        m, 2 or 4.
    points : sequence of pairs of int, optional
        Occupied (p, s), the sea's points being p + s tau with tau of ``frame.isotropic``; those nearest to the
        origin when None.

    Raises
    ------
    GeometryError
        If ``n_electrons`` closes no shell of the isotropic cell, the points given make no sea, or the cell is
        too elongated.
    """

    exponent: int
    n_electrons: int
    frame: TorusFrame
    points: Sequence[Sequence[int]] | None = None
    kind: str = "fermi_sea"
    statistics: str = FERMIONS
    shift: int | None = None
    first_occupied: int = 1
    proposals_per_sweep: int = _PROPOSALS_PER_VISIT
    best_acceptance: float = 0.38
    first_step: float = 5.5
    sweeps_per_measurement: int = 1
    _tables: FermiSeaTables = field(init=False, repr=False)

    def __post_init__(self) -> None:
        if self.exponent not in (2, 4):
            raise GeometryError(f"a composite-fermion sea has exponent 2 or 4, not {self.exponent}")
        cell = self.frame.isotropic
        if self.points is None:
            sea = closed_sea(cell.tau, self.n_electrons)
        else:
            sea = checked_points(self.points, self.n_electrons)
        sea = sea[np.lexsort((sea[:, 1], sea[:, 0]))]
        widest = float(np.max(np.abs(sea[:, 1] - sea[:, 1].mean())))
        self.frame.require_tau_below(largest_imaginary_tau(self.n_electrons, widest))
        object.__setattr__(self, "_tables", fermi_sea_tables(self.exponent, cell.tau, cell.side, sea))

    @property
    def cost_per_pair(self) -> float:
        """N factors of the determinant per other electron, and elimination in N^3."""
        return 180.0 + 6.0 * self.n_electrons

    @property
    def label(self) -> str:
        """Composite-fermion sea 1/m."""
        return f"composite-fermion sea {self.filling}"

    @property
    def filling(self) -> Fraction:
        """1/m."""
        return Fraction(1, self.exponent)

    def group(self, a: Array, b: Array, words: NDArray[np.uint64]) -> FermiSeaGroup:
        """Eight walkers at the given fractions."""
        return FermiSeaGroup(self._tables, a, b, words)

    def log_weight(self, a: Array, b: Array) -> Array:
        """log |Psi|^2 of the relative part up to a constant, shape (8,)."""
        a, b = np.ascontiguousarray(a), np.ascontiguousarray(b)
        kept = fermi_sea_store(self.n_electrons)
        refresh(self._tables, a, b, kept)
        out = np.empty(LANES)
        log_weights(self._tables, a, b, kept, out)
        return out
