"""Interactions given as tables of V(q).

What is interpolated is F(q) = |q| V(q)/2 pi, smooth and bounded for anything that falls as 1/r or faster.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline, RectBivariateSpline

from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.pair_potential import IsotropicPotential, PairPotential
from mcgeo.problem.table_text import Table, parse_table

Array = NDArray[np.float64]

# In steps of the grid: nearer to the origin the spline feels its edge; points that a cubic continues inwards.
_INNER = 2.0
_RAY = np.array([1.0, 1.5, 2.0, 2.5])


@dataclass(frozen=True, eq=False)
class IsotropicTable(IsotropicPotential):
    """V(q) from a table of q and V.

    A cubic spline without prescribed slopes joins the values of q V. Below the first q it continues as the cubic
    through the first four points, so that V = c/q + c' + ... there. Beyond the last q it continues as a + b/q + c/q^2
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
    _spline: CubicSpline = field(init=False, repr=False)
    _tail: Array = field(init=False, repr=False)

    def __post_init__(self) -> None:
        q = np.array(self.table.axes[0])
        spline = CubicSpline(q, q * np.array(self.table.values[0]) / (2.0 * math.pi))
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

    A bicubic spline joins the values of |q|_h V, h the metric in which V is most nearly isotropic next to the origin:
    a dielectric's V is then smooth there but for the edge of |q|_h. Within two steps of the origin V continues along
    every direction as the cubic in |q|_h through four points farther out. Beyond the grid |q|_h V keeps
    the value at the edge in the same direction; the orbit's form factor leaves little of that in energies.

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
    _spline: RectBivariateSpline = field(init=False, repr=False)
    _inner: float = field(init=False, repr=False)

    def __post_init__(self) -> None:
        x, y = (np.array(axis) for axis in self.table.axes)
        points = np.stack(np.meshgrid(x, y, indexing="ij"), axis=-1)
        values = np.array(self.table.values)
        step = max(x[1] - x[0], y[1] - y[0])
        metric = _innermost_metric(points, values, step)
        reduced = np.sqrt(metric.wavevector_norm_sq(points)) * values
        # At the origin |q| V jumps or has an edge; the inner cubic replaces what the spline makes of it.
        near = np.hypot(points[..., 0], points[..., 1])
        ring = [reduced[(near > 0.5 * k * step) & (near < (k + 0.45) * step)].mean() for k in (1, 2)]
        reduced[near == 0.0] = 2.0 * ring[0] - ring[1]
        object.__setattr__(self, "_metric", metric)
        object.__setattr__(self, "_spline", RectBivariateSpline(x, y, reduced))
        object.__setattr__(self, "_inner", _INNER * step * math.exp(0.5 * metric.stretch))

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
        norm = np.sqrt(self._metric.wavevector_norm_sq(q))
        scale = np.maximum(norm, self._inner) / norm
        reduced = self._on_grid(q * scale[..., None])
        inside = norm < self._inner
        if np.any(inside):
            outwards = q[inside] * (self._inner / norm[inside])[:, None]
            samples = self._on_grid(_RAY[:, None, None] * outwards)
            reduced[inside] = np.sum(_lagrange_weights(norm[inside] / self._inner) * samples, axis=0)
        return np.asarray(reduced / norm)

    def _on_grid(self, wavevectors: Array) -> Array:
        """|q|_h V of the spline, at the edge in the same direction for points beyond it."""
        limits = np.array([axis[-1] for axis in self.table.axes])
        beyond = np.maximum(1.0, np.max(np.abs(wavevectors) / limits, axis=-1))
        inside = wavevectors / beyond[..., None]
        return np.asarray(self._spline(inside[..., 0], inside[..., 1], grid=False))


def _innermost_metric(points: Array, values: Array, step: float) -> UnimodularMetric:
    """The metric of 1/V^2 = q.G.q fitted to the points next to the origin; isotropic if that is no metric."""
    near = np.hypot(points[..., 0], points[..., 1])
    ring = (near > 0.0) & (near < 1.5 * step)
    if not np.all(values[ring] > 0.0):
        return ISOTROPIC
    x, y = points[ring].T
    form = np.stack([x**2, 2.0 * x * y, y**2], axis=-1) * values[ring, None] ** 2
    xx, xy, yy = np.linalg.lstsq(form, np.ones(len(form)), rcond=None)[0]
    if xx <= 0.0 or xx * yy - xy**2 <= 0.0:
        return ISOTROPIC
    return UnimodularMetric.from_matrix([[xx, xy], [xy, yy]]).inverse


def _lagrange_weights(position: Array) -> Array:
    """Weights of the four points of a ray, shape (4, n), at fractions of the inner radius."""
    weights = np.ones((len(_RAY), len(position)))
    for j, own in enumerate(_RAY):
        for other in np.delete(_RAY, j):
            weights[j] *= (position - other) / (own - other)
    return weights


def tabulated(file: Mapping[str, str]) -> PairPotential:
    """The interaction of a table's file: its ``name`` for reports and its ``content``.

    Raises
    ------
    TableError
        If the text is no table; the message tells the line.
    """
    table = parse_table(file["content"])
    return (IsotropicTable if len(table.axes) == 1 else GridTable)(table, file["name"])
