"""The look of the figures, kept inside a context: nobody else's settings change."""

from __future__ import annotations

from collections.abc import Callable
from functools import wraps
from pathlib import Path
from typing import Any, Literal, ParamSpec, TypeVar

import matplotlib
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.legend import Legend
from matplotlib.transforms import ScaledTranslation

P = ParamSpec("P")
T = TypeVar("T")

STYLE_FILE = Path(__file__).with_name("mcgeo.mplstyle")
COLUMN_INCHES = {1: 3.4, 2: 7.0}
ENERGY_UNIT = r"$e^2/4\pi\varepsilon\ell_B$"
ENERGY_LABEL = r"$E\,/\,(e^2/4\pi\varepsilon\ell_B)$ per electron"

BLUE, VERMILION, GREEN, GREY = "#0072B2", "#D55E00", "#009E73", "#808080"

# Points between an axis and what stands below its label.
_BELOW_LABEL = 26.0


def styled(function: Callable[P, T]) -> Callable[P, T]:
    """Run ``function`` with the package's style sheet."""

    @wraps(function)
    def inside(*args: P.args, **kwargs: P.kwargs) -> T:
        with matplotlib.rc_context(fname=STYLE_FILE):
            return function(*args, **kwargs)

    return inside


@styled
def new_axes(columns: Literal[1, 2] = 1, height: float | None = None) -> Axes:
    """Axes of a new figure, one or two journal columns wide.

    Parameters
    ----------
    columns : int
        1 (3.4 inches) or 2 (7.0 inches).
    height : float, optional
        In inches; 0.76 of a column without it.
    """
    return Figure(figsize=(COLUMN_INCHES[columns], height or 0.76 * COLUMN_INCHES[1])).subplots()


@styled
def new_panels(count: int, height: float) -> list[Axes]:
    """Axes side by side in one figure of two journal columns, ``height`` inches high."""
    return list(Figure(figsize=(COLUMN_INCHES[2], height)).subplots(1, count, squeeze=False)[0])


def legend_below(axes: Axes, **options: Any) -> Legend:
    """Legend under the label of the x axis, where it hides nothing."""
    shift = ScaledTranslation(0.0, -_BELOW_LABEL / 72.0, axes.figure.dpi_scale_trans)
    transform = axes.transAxes + shift
    return axes.legend(loc="upper center", bbox_to_anchor=(0.5, 0.0), bbox_transform=transform, **options)
