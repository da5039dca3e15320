"""A result of a sweep against one swept key, and the hole's aspect ratio against the mass's."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import matplotlib
import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from matplotlib.ticker import FixedLocator, NullLocator
from numpy.typing import NDArray

from mcgeo.report.labels import value_label
from mcgeo.report.style import GREY, legend_below, new_axes, styled
from mcgeo.variational.response import SOFT, STABLE, UNSTABLE

Array = NDArray[np.float64]

# Families of so many values of a number have the colours of a scale, others those of the style sheet.
_LEAST_FOR_SCALE = 4
_MOST_COLOURS = 7
_SCALE = ("viridis", 0.0, 0.88)
_MARKERS = {STABLE: "o", SOFT: "D", UNSTABLE: "o"}
_VERDICT_WORDS = {SOFT: "soft shape", UNSTABLE: "unstable shape"}
_SPREAD_OF_TICKS = 1.08
_TICK_LADDERS = (
    (1.0,),
    (1.0, 3.0),
    (1.0, 2.0, 5.0),
    (1.0, 1.5, 2.0, 3.0, 4.0, 6.0, 8.0),
    tuple(1.0 + 0.1 * np.arange(90)),
)
_LEAST_TICKS = 4
# Width of a column of the journal in letters of the legend, and of a handle with its margin.
_LETTERS_OF_LEGEND, _LETTERS_OF_HANDLE = 54, 9


@dataclass(frozen=True, eq=False)
class Family:
    """Points of one line.

    Attributes
    ----------
    value : object
        Of the key that tells families apart; None where there is one family only.
    x : ndarray, shape (n,)
        Numbers, or places of values that are none.
    y, error : ndarray, shape (n,)
        NaN where a point is missing.
    shape_verdict : ndarray of str, shape (n,)
    converged : ndarray of bool, shape (n,)
    """

    value: Any
    x: Array
    y: Array
    error: Array
    shape_verdict: NDArray[Any]
    converged: NDArray[np.bool_]


@dataclass(frozen=True)
class SweptAxis:
    """What an axis says of a swept key.

    Attributes
    ----------
    label : str
    logarithmic : bool
    words : sequence of str
        Of values that are no numbers, at 0, 1, 2, ...; empty for numbers.
    values : sequence of float
        The values swept.
    """

    label: str
    logarithmic: bool
    words: Sequence[str]
    values: Sequence[float]


@styled
def sweep_curves(
    families: Sequence[Family],
    *,
    along: SweptAxis,
    ylabel: str,
    family_label: str,
    title: str,
    axes: Axes | None = None,
) -> Axes:
    """A result against a swept key, one line per family, with standard errors.

    Filled circles are stable shapes, diamonds soft ones, open circles unstable ones (no line leads there); a cross
    marks points whose run has not converged.

    Parameters
    ----------
    families : sequence of Family
    along : SweptAxis
    ylabel, family_label, title : str
    axes : Axes, optional

    Returns
    -------
    Axes
    """
    axes = new_axes(height=2.9) if axes is None else axes
    _draw_families(axes, families)
    set_swept_axis(axes, "x", along)
    axes.set(ylabel=ylabel)
    axes.set_title(title)
    _legend(axes, families, family_label, [])
    return axes


@styled
def aspect_curves(families: Sequence[Family], *, family_label: str, title: str, axes: Axes | None = None) -> Axes:
    """Aspect ratio of the hole against that of the mass metric on logarithmic axes, with two guides.

    The square-root law, hole = mass^(1/2), and a hole shaped as the mass. Marks as in `sweep_curves`.
    """
    axes = new_axes(height=3.2) if axes is None else axes
    x = np.concatenate([family.x[np.isfinite(family.y)] for family in families])
    ends = np.array([min(1.0, x.min()), x.max() * _SPREAD_OF_TICKS]) if len(x) else np.array([1.0, 2.0])
    guides = [
        axes.plot(ends, ends, color=GREY, linewidth=0.8, linestyle=":", label="hole like the mass")[0],
        axes.plot(ends, np.sqrt(ends), color="black", linewidth=0.8, linestyle="--", label="square-root law")[0],
    ]
    _draw_families(axes, families)
    axes.set(xscale="log", yscale="log", xlim=ends)
    axes.set_xlabel(r"aspect ratio of the mass metric $e^{Q_m}=\sqrt{m_x/m_y}$")
    axes.set_ylabel(r"aspect ratio of the hole $e^{Q^*}$")
    for axis, (low, high) in ((axes.xaxis, axes.get_xlim()), (axes.yaxis, axes.get_ylim())):
        _plain_ticks(axis, low, high)
    axes.set_title(title)
    _legend(axes, families, family_label, guides)
    return axes


def set_swept_axis(axes: Axes, which: str, swept: SweptAxis) -> None:
    """Scale, ticks and label of the ``x`` or ``y`` axis."""
    axis = axes.xaxis if which == "x" else axes.yaxis
    axis.set_label_text(swept.label)
    if swept.words:
        axis.set_major_locator(FixedLocator(list(range(len(swept.words)))))
        turned: dict[str, Any] = {"rotation": 20, "ha": "right"} if which == "x" else {}
        axis.set_ticklabels([words.replace(", ", ",\n") for words in swept.words], **turned)
        return
    if swept.logarithmic:
        axes.set(**{f"{which}scale": "log"})
        _plain_ticks(axis, min(swept.values), max(swept.values))


def _plain_ticks(axis: Any, low: float, high: float) -> None:
    """Ticks of a logarithmic axis at round numbers, written as such."""
    for ladder in _TICK_LADDERS:
        decades = 10.0 ** np.arange(np.floor(np.log10(low)), np.ceil(np.log10(high)) + 1)
        ticks = np.outer(decades, ladder).ravel()
        ticks = ticks[(ticks > low / 1.001) & (ticks < high * 1.001)]
        if len(ticks) >= _LEAST_TICKS:
            break
    axis.set_major_locator(FixedLocator(list(ticks)))
    axis.set_ticklabels([f"{tick:.3g}" for tick in ticks])
    axis.set_minor_locator(NullLocator())


def _colours(families: Sequence[Family]) -> list[Any]:
    numbers = all(isinstance(family.value, int | float | np.number) for family in families)
    if len(families) > _MOST_COLOURS or (numbers and len(families) >= _LEAST_FOR_SCALE):
        name, low, high = _SCALE
        return list(matplotlib.colormaps[name](np.linspace(low, high, len(families))))
    return [f"C{index}" for index in range(len(families))]


def _draw_families(axes: Axes, families: Sequence[Family]) -> None:
    for family, colour in zip(families, _colours(families), strict=True):
        order = np.argsort(family.x, kind="stable")
        x, y, error = family.x[order], family.y[order], family.error[order]
        verdict, converged = family.shape_verdict[order], family.converged[order]
        # No line leads to a shape that is no minimum.
        axes.plot(x, np.where(verdict == UNSTABLE, np.nan, y), color=colour, linewidth=0.9)
        for name, marker in _MARKERS.items():
            of = (verdict == name) & np.isfinite(y)
            if of.any():
                face = "white" if name == UNSTABLE else colour
                axes.errorbar(
                    x[of], y[of], yerr=error[of], fmt=marker, color=colour, markerfacecolor=face, markersize=3.2
                )
        doubtful = ~converged & np.isfinite(y)
        axes.plot(x[doubtful], y[doubtful], "x", color="black", markersize=6.0, markeredgewidth=0.8)


def _legend(axes: Axes, families: Sequence[Family], family_label: str, guides: Sequence[Line2D]) -> None:
    handles = list(guides)
    if families and families[0].value is not None:
        handles += [
            Line2D([], [], color=colour, marker="o", label=value_label(family.value))
            for family, colour in zip(families, _colours(families), strict=True)
        ]
    present = {verdict for family in families for verdict in family.shape_verdict[np.isfinite(family.y)]}
    for verdict, words in _VERDICT_WORDS.items():
        if verdict in present:
            face = "white" if verdict == UNSTABLE else "black"
            mark = {"marker": _MARKERS[verdict], "markerfacecolor": face, "color": "black", "linestyle": "none"}
            handles.append(Line2D([], [], label=words, **mark))  # type: ignore[arg-type]
    if any((~family.converged & np.isfinite(family.y)).any() for family in families):
        handles.append(Line2D([], [], color="black", marker="x", linestyle="none", label="run not converged"))
    if handles:
        longest = max(len(str(handle.get_label())) for handle in handles)
        columns = max(1, min(len(handles), _LETTERS_OF_LEGEND // (longest + _LETTERS_OF_HANDLE)))
        legend_below(axes, handles=handles, title=family_label or None, ncols=columns, columnspacing=1.0)
