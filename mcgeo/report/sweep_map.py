"""A result of a sweep over two swept keys."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.collections import LineCollection, PatchCollection
from matplotlib.patches import Patch, Rectangle
from numpy.typing import NDArray

from mcgeo.report.style import legend_below, new_axes, styled
from mcgeo.report.sweep_figure import SweptAxis, set_swept_axis
from mcgeo.variational.response import SOFT, UNSTABLE

Array = NDArray[np.float64]

_HATCHES = {SOFT: ("....", "soft shape"), UNSTABLE: ("xxxx", "unstable shape")}
_MISSING = ("/////", "no result")


@styled
def sweep_map(
    values: Array,
    verdict: NDArray[np.object_],
    *,
    along: SweptAxis,
    across: SweptAxis,
    label: str,
    title: str,
    axes: Axes | None = None,
) -> Axes:
    """Heat map, one cell per point, with regions of soft and unstable shapes and cells without a result hatched.

    Parameters
    ----------
    values : ndarray, shape (n_across, n_along)
        NaN where there is no result.
    verdict : ndarray of str, shape (n_across, n_along)
    along, across : SweptAxis
        Horizontal and vertical key, in ascending order.
    label, title : str
    axes : Axes, optional

    Returns
    -------
    Axes
    """
    axes = new_axes(height=3.1) if axes is None else axes
    x, y = cell_edges(along), cell_edges(across)
    mesh = axes.pcolormesh(x, y, np.ma.masked_invalid(values), cmap="viridis", rasterized=True)
    bar = axes.figure.colorbar(mesh, ax=axes, pad=0.02)
    bar.set_label(label)
    present = []
    for name, (hatch, words) in _HATCHES.items():
        present += _hatched(axes, x, y, verdict == name, hatch, words, "white")
    present += _hatched(axes, x, y, ~np.isfinite(values), *_MISSING, "0.5")
    axes.add_collection(LineCollection(_borders(x, y, verdict), colors="white", linewidths=1.2))
    set_swept_axis(axes, "x", along)
    set_swept_axis(axes, "y", across)
    axes.set(xlim=(x[0], x[-1]), ylim=(y[0], y[-1]))
    axes.set_title(title)
    if present:
        legend_below(axes, handles=present, ncols=len(present))
    return axes


def cell_edges(swept: SweptAxis) -> Array:
    """Edges of cells about the values: halfway between neighbours, in the logarithm where the axis has one."""
    centres = np.asarray(np.arange(len(swept.words)) if swept.words else swept.values, dtype=float)
    if swept.logarithmic:
        centres = np.log(centres)
    middles = 0.5 * (centres[1:] + centres[:-1])
    edges = np.concatenate([[2.0 * centres[0] - middles[0]], middles, [2.0 * centres[-1] - middles[-1]]])
    return np.exp(edges) if swept.logarithmic else edges


def _hatched(
    axes: Axes, x: Array, y: Array, where: NDArray[np.bool_], hatch: str, words: str, colour: str
) -> list[Patch]:
    """Hatch cells; gives their entry of the legend, none where there are none."""
    cells = [Rectangle((x[i], y[j]), x[i + 1] - x[i], y[j + 1] - y[j]) for j, i in zip(*np.nonzero(where), strict=True)]
    if not cells:
        return []
    axes.add_collection(
        PatchCollection(cells, facecolor="none", edgecolor=colour, hatch=hatch, linewidth=0.0, rasterized=False)
    )
    face = "0.35" if colour == "white" else "white"
    return [Patch(facecolor=face, edgecolor=colour, hatch=hatch, linewidth=0.0, label=words)]


def _borders(x: Array, y: Array, verdict: NDArray[np.object_]) -> list[Array]:
    """Edges of cells between two verdicts."""
    lines = []
    for j, i in zip(*np.nonzero(verdict[:, 1:] != verdict[:, :-1]), strict=True):
        lines.append(np.array([[x[i + 1], y[j]], [x[i + 1], y[j + 1]]]))
    for j, i in zip(*np.nonzero(verdict[1:] != verdict[:-1]), strict=True):
        lines.append(np.array([[x[i], y[j + 1]], [x[i + 1], y[j + 1]]]))
    return lines
