"""The hole in the plane: g(x, y) with the shapes of mass orbit, guiding-centre correlations and contour."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import TwoSlopeNorm
from matplotlib.lines import Line2D
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from mcgeo.estimate.statistics import Estimate
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.report.numbers import degrees_with_error, value_with_error
from mcgeo.report.style import legend_below, new_axes, styled

Array = NDArray[np.float64]

# The scale goes on to here at least, so that the weak structure above g = 1 keeps pale colours.
_LEAST_TOP = 1.3
_TICKS_ABOVE = 4.0
_MAP_INCHES = 2.4
_AROUND_MAP_INCHES = 1.35
_ELLIPSE_POINTS = 181
# Beyond this error (radians) an angle of period pi says nothing.
_UNKNOWN_ANGLE = math.pi / 4


@dataclass(frozen=True)
class MeasuredShape:
    """A unimodular metric with the errors of its two numbers.

    Attributes
    ----------
    stretch : Estimate
        Q.
    angle : Estimate
        theta in radians, the direction of the ellipse's short axis.
    """

    stretch: Estimate
    angle: Estimate

    @classmethod
    def exact(cls, metric: UnimodularMetric) -> MeasuredShape:
        """A shape that is given, not measured."""
        return cls(Estimate(metric.stretch, 0.0), Estimate(metric.angle, 0.0))

    @property
    def metric(self) -> UnimodularMetric:
        """The metric at the means."""
        return UnimodularMetric(self.stretch.value, self.angle.value)

    @property
    def words(self) -> str:
        """Aspect ratio and angle, each with its error."""
        ratio = self.metric.aspect_ratio
        shown = value_with_error(Estimate(ratio, ratio * self.stretch.error))
        if self.metric.stretch == 0.0:
            return f"{shown}, circle"
        if not self.angle.error < _UNKNOWN_ANGLE:
            return f"{shown}, direction unknown"
        return f"{shown}, {degrees_with_error(Estimate(self.metric.angle, self.angle.error))}"


class _LineStyle(NamedTuple):
    color: str
    width: float
    dashes: str | tuple[float, tuple[float, ...]]


# Painted from wide to narrow: where lines coincide each stays visible as a rim or through the gaps of the next.
_MASS = _LineStyle("#F0B400", 5.0, "-")
_HOLE = _LineStyle("#B04AD8", 3.2, "-")
_CONTOUR = _LineStyle("black", 1.3, "-")
_FITTED = _LineStyle("#FF6A3D", 0.9, (0.0, (3.0, 3.0)))


def ellipse_points(metric: UnimodularMetric, radius: float) -> Array:
    """Closed curve r.g.r = radius^2, shape (2, 181)."""
    t = np.linspace(0.0, 2.0 * math.pi, _ELLIPSE_POINTS)
    return np.asarray(radius * metric.inverse_linear_map @ np.stack([np.cos(t), np.sin(t)]))


@styled
def hole_map(
    x: Array,
    y: Array,
    g: Array,
    *,
    contour_level: float,
    contour_radius: float,
    mass_metric: MeasuredShape,
    hole_metric: MeasuredShape,
    fitted_metric: MeasuredShape | None,
    mass_label: str = "mass orbit",
    hole_label: str = "guiding-centre hole",
    fitted_label: str = "fitted ellipse",
    axes: Axes | None = None,
) -> Axes:
    """Pair correlation over the plane, with the shapes that compete for it.

    All ellipses enclose the area pi contour_radius^2, so that they differ in shape alone. Angles are those of the
    short axes.

    Parameters
    ----------
    x, y : ndarray, shapes (n,) and (m,)
        In l_B.
    g : ndarray, shape (m, n)
    contour_level : float
        The contour g = contour_level is drawn where the map reaches it.
    contour_radius : float
        Radius in l_B of the circle with the contour's area.
    mass_metric, hole_metric : MeasuredShape
        Shapes of the Landau orbit and of the guiding-centre correlations.
    fitted_metric : MeasuredShape or None
        Ellipse fitted to the contour; None where the contour is open.
    mass_label, hole_label, fitted_label : str
    axes : Axes, optional

    Returns
    -------
    Axes
    """
    if axes is None:
        axes = new_axes(height=_AROUND_MAP_INCHES + _MAP_INCHES * (y[-1] - y[0]) / (x[-1] - x[0]))
    _paint_map(axes, x, y, g)
    handles = []
    for shape, label, line in ((mass_metric, mass_label, _MASS), (hole_metric, hole_label, _HOLE)):
        handles.append(_draw_ellipse(axes, shape, contour_radius, f"{label}: {shape.words}", line))
    if float(np.nanmin(g)) < contour_level < float(np.nanmax(g)):
        color, width, _ = _CONTOUR
        axes.contour(x, y, g, levels=[contour_level], colors=color, linewidths=width)
        handles.append(Line2D([], [], color=color, linewidth=width, label=f"contour g = {contour_level:g}"))
    if fitted_metric is not None:
        label = f"{fitted_label}: {fitted_metric.words}"
        handles.append(_draw_ellipse(axes, fitted_metric, contour_radius, label, _FITTED))
    axes.set(xlim=(x[0], x[-1]), ylim=(y[0], y[-1]), aspect="equal", anchor="N")
    for axis in (axes.xaxis, axes.yaxis):
        axis.set_major_locator(MaxNLocator(nbins=7, steps=[1, 2, 5, 10], integer=True))
    axes.set(xlabel=r"$x\,/\,\ell_B$", ylabel=r"$y\,/\,\ell_B$")
    legend_below(axes, handles=handles, title="aspect ratio, direction of the short axis")
    return axes


def _paint_map(axes: Axes, x: Array, y: Array, g: Array) -> None:
    top = max(float(np.nanmax(g)), _LEAST_TOP)
    norm = TwoSlopeNorm(vmin=min(float(np.nanmin(g)), 0.0), vcenter=1.0, vmax=top)
    mesh = axes.pcolormesh(x, y, g, norm=norm, cmap="RdBu_r", shading="nearest", rasterized=True)
    bar_axes = axes.inset_axes((1.03, 0.0, 0.045, 1.0))
    # The two halves of the scale differ in slope, so each gets ticks of its own.
    step = next(s for s in (0.1, 0.2, 0.5, 1.0, 2.0, top) if (top - 1.0) / s < _TICKS_ABOVE)
    ticks = [0.0, 0.25, 0.5, 0.75, *np.arange(1.0, top + 1e-9, step)]
    bar = axes.figure.colorbar(mesh, cax=bar_axes, ticks=ticks, format="%g")
    bar.set_label("pair correlation $g(x, y)$")


def _draw_ellipse(axes: Axes, shape: MeasuredShape, radius: float, label: str, line: _LineStyle) -> Line2D:
    points = ellipse_points(shape.metric, radius)
    (drawn,) = axes.plot(
        points[0], points[1], color=line.color, linewidth=line.width, linestyle=line.dashes, label=label
    )
    return drawn
