"""Interactions given as tables of V(q).

What is interpolated is F(q) = |q| V(q)/2 pi, smooth and bounded for anything that falls as 1/r or faster.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.pair_potential import IsotropicPotential, PairPotential
from mcgeo.problem.table_text import Table, parse_table

if TYPE_CHECKING:
    from scipy.interpolate import BSpline, RectBivariateSpline

Array = NDArray[np.float64]

# Points of a grid, on each of four lines through the origin, that tell V(q) next to it.
_ON_LINE = 5
# A tail 1/|q| below this part of the largest |q| V is none.
_LEAST_TAIL = 0.02


@dataclass(frozen=True, eq=False)
class IsotropicTable(IsotropicPotential):
    """V(q) from a table of q and V.

    A quintic spline joins the values of q V. Below the first q its first piece continues, a polynomial, so that V = c/q
    + c' + ... there. Beyond the last q it continues as a + b/q + c/q^2
    with the value, slope and curvature of the end; the orbit's form factor leaves nothing of that in energies.

    Parameters
    ----------
    table : Table
        With one axis.
    label : str
        Where it comes from, for reports.
    """

    table: Table
    label: str
    _spline: BSpline = field(init=False, repr=False)
    _tail: Array = field(init=False, repr=False)

    def __post_init__(self) -> None:
        # Here, since it takes as long to load as a small run takes.
        from scipy.interpolate import make_interp_spline

        q = np.array(self.table.axes[0])
        spline = make_interp_spline(q, q * np.array(self.table.values[0]) / (2.0 * math.pi), k=5)
        last = q[-1]
        # Polynomial in last/q with the three derivatives: rows are its value, q d/dq, q^2 d^2/dq^2 at the end.
        conditions = np.array([[1.0, 1.0, 1.0], [0.0, -1.0, -2.0], [0.0, 2.0, 6.0]])
        end = np.array([float(spline(last, k)) * last**k for k in range(3)])
        object.__setattr__(self, "_spline", spline)
        object.__setattr__(self, "_tail", np.linalg.solve(conditions, end))

    @property
    def name(self) -> str:
        """Where the table comes from."""
        return f"table {self.label}"

    def radial(self, wavenumbers: Array) -> Array:
        """Interpolated V(q)."""
        q, last = np.asarray(wavenumbers, dtype=float), self.table.axes[0][-1]
        inverse = last / np.maximum(q, last)
        tail = self._tail[0] + (self._tail[1] + self._tail[2] * inverse) * inverse
        return np.asarray(2.0 * math.pi * np.where(q > last, tail, self._spline(np.minimum(q, last))) / q)


@dataclass(frozen=True, eq=False)
class GridTable(PairPotential):
    """V(q) from a table of q_x, q_y and V on a rectangular grid.

    Next to the origin |q| V = a(u) + c(u) |q| + ..., u the direction of q, has an edge, or jumps. a and c are taken
    from the polynomials through the first five points on the two axes and the two diagonals. The metric h with |q|_h
    ~ |q|/a(u) takes the jump away, as that of an anisotropic dielectric; the edge (q.C.q)/|q| e^(-q^2), C fitted to
    c(u), is subtracted; a bicubic spline joins what is left of |q|_h V. Beyond the grid |q|_h V keeps the value at the
    edge of the grid in the same direction; the orbit's form factor leaves little of that in energies.

    Parameters
    ----------
    table : Table
        With two axes.
    label : str
        Where it comes from, for reports.
    """

    table: Table
    label: str
    _metric: UnimodularMetric = field(init=False, repr=False)
    _edge: Array = field(init=False, repr=False)
    _spline: RectBivariateSpline = field(init=False, repr=False)

    def __post_init__(self) -> None:
        from scipy.interpolate import RectBivariateSpline

        x, y = (np.array(axis) for axis in self.table.axes)
        points = np.stack(np.meshgrid(x, y, indexing="ij"), axis=-1)
        values = np.array(self.table.values)
        directions, tails, slopes = _at_origin(points, values)
        largest = np.max(np.hypot(points[..., 0], points[..., 1]) * values)
        metric = _tail_metric(directions, tails, _LEAST_TAIL * largest)
        norms = np.sqrt(metric.wavevector_norm_sq(directions))
        object.__setattr__(self, "_metric", metric)
        object.__setattr__(self, "_edge", _form(directions, slopes * norms))
        reduced = np.sqrt(metric.wavevector_norm_sq(points)) * values - self._edge_part(points)
        reduced[len(x) // 2, len(y) // 2] = np.mean(tails * norms)
        object.__setattr__(self, "_spline", RectBivariateSpline(x, y, reduced))

    def _edge_part(self, wavevectors: Array) -> Array:
        """(q.C.q)/|q| e^(-q^2)."""
        norm_sq = np.sum(wavevectors**2, axis=-1)
        form = np.einsum("...a,ab,...b->...", wavevectors, self._edge, wavevectors)
        return np.asarray(form * np.exp(-norm_sq) / np.sqrt(np.where(norm_sq > 0.0, norm_sq, 1.0)))

    @property
    def name(self) -> str:
        """Where the table comes from."""
        return f"table {self.label}"

    @property
    def metrics(self) -> tuple[UnimodularMetric, ...]:
        """The metric next to the origin, and the isotropic one."""
        return (self._metric, ISOTROPIC)

    def potential(self, wavevectors: Array) -> Array:
        """Interpolated V(q)."""
        q = np.asarray(wavevectors, dtype=float)
        limits = np.array([axis[-1] for axis in self.table.axes])
        beyond = np.maximum(1.0, np.max(np.abs(q) / limits, axis=-1))
        inside = q / beyond[..., None]
        reduced = self._spline(inside[..., 0], inside[..., 1], grid=False) + self._edge_part(inside)
        return np.asarray(reduced / np.sqrt(self._metric.wavevector_norm_sq(q)))


def _at_origin(points: Array, values: Array) -> tuple[Array, Array, Array]:
    """Directions (4, 2) of axes and diagonals, and |q| V and its derivative by |q| at the origin along each."""
    middle = np.array(values.shape) // 2
    steps = np.arange(1, _ON_LINE + 1)[:, None]
    directions, tails, slopes = [], [], []
    for line in ((1, 0), (0, 1), (1, 1), (1, -1)):
        index = tuple((middle + steps * np.array(line)).T)
        length = np.hypot(*points[index].T)
        polynomial = np.linalg.solve(np.vander(length, increasing=True), length * values[index])
        directions.append(points[index][0] / length[0])
        tails.append(polynomial[0])
        slopes.append(polynomial[1])
    return np.array(directions), np.array(tails), np.array(slopes)


def _form(directions: Array, values: Array) -> Array:
    """The symmetric matrix M of least squares with u.M.u = values, shape (2, 2)."""
    x, y = directions.T
    xx, xy, yy = np.linalg.lstsq(np.stack([x * x, 2.0 * x * y, y * y], axis=-1), values, rcond=None)[0]
    return np.array([[xx, xy], [xy, yy]])


def _tail_metric(directions: Array, tails: Array, least: float) -> UnimodularMetric:
    """The metric h of V = const/|q|_h at small q, 1/tail^2 being a form of q; isotropic if there is no such tail."""
    if np.any(tails < least):
        return ISOTROPIC
    form = _form(directions, tails**-2.0)
    if not (form[0, 0] > 0.0 and np.linalg.det(form) > 0.0):
        return ISOTROPIC
    return UnimodularMetric.from_matrix(form).inverse


def tabulated(file: Mapping[str, str]) -> PairPotential:
    """The interaction of a table's file: its ``name`` for reports and its ``content``.

    Raises
    ------
    TableError
        If the text is no table; the message tells the line.
    """
    table = parse_table(file["content"])
    return (IsotropicTable if len(table.axes) == 1 else GridTable)(table, file["name"])
