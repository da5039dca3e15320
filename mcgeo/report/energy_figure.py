"""The energy along one line of metrics, its minimum, and what that says of the hole's shape."""

from __future__ import annotations

import math

import numpy as np
from matplotlib.axes import Axes
from numpy.typing import NDArray

from mcgeo.estimate.statistics import Estimate
from mcgeo.report.numbers import degrees_with_error, value_with_error
from mcgeo.report.style import BLUE, ENERGY_LABEL, ENERGY_UNIT, GREEN, GREY, VERMILION, legend_below, new_axes, styled
from mcgeo.variational.minimum import Minimum
from mcgeo.variational.response import SOFT, STABLE, UNSTABLE

Array = NDArray[np.float64]

VERDICT_WORDS = {
    STABLE: "stable shape",
    SOFT: "soft shape: the hole exaggerates the mass",
    UNSTABLE: "unstable: the isotropic hole is no minimum",
}
# A minimum this close, in flat coordinates, lies on the line of the curve.
_ON_LINE = 0.02
_LEAST_TICKS = 4
_LEAST_TICK_DISTANCE = 0.115
_RATIO_LADDERS = (
    (1.0, 2.0, 4.0, 8.0, 16.0, 32.0),
    (1.0, 1.5, 2.0, 3.0, 4.0, 6.0, 8.0, 12.0),
    (1.0, 1.2, 1.4, 1.7, 2.0, 2.5),
    tuple(1.0 + 0.05 * k for k in range(8)),
)


@styled
def energy_curve(
    stretch: Array,
    energy: Array,
    error: Array,
    *,
    minimum: Minimum | None,
    verdict: str,
    mass_stretch: float,
    angle_degrees: float,
    difference_error: Array | None = None,
    axes: Axes | None = None,
) -> Axes:
    """E(Q) along metrics of one angle, with minimum, stiffness parabola, and the verdict as title.

    The errors of different Q are almost the same fluctuation: the shape of the curve is known far better than its
    height. ``difference_error`` shows how well.

    Parameters
    ----------
    stretch : ndarray, shape (n,)
        Q, ascending; negative values are the perpendicular direction.
    energy, error : ndarray, shape (n,)
        E and its standard error, in e^2/(4 pi eps l_B) per electron.
    minimum : Minimum or None
        A minimum off the line is marked at its projection, without parabola; one that is not interior is not marked.
    verdict : str
        ``stable``, ``soft`` or ``unstable``.
    mass_stretch : float
        Q_m along the line: there the hole has the shape of the orbit.
    angle_degrees : float
        theta of the line.
    difference_error : ndarray, shape (n,), optional
        Standard error of E(Q) - E(Q*).
    axes : Axes, optional

    Returns
    -------
    Axes
    """
    axes = new_axes(height=3.6) if axes is None else axes
    _draw_band(axes, stretch, energy, error, alpha=0.2, label="error of $E(Q)$, common")
    if difference_error is not None:
        _draw_band(axes, stretch, energy, difference_error, alpha=0.5, label="error of $E(Q)-E(Q^*)$")
    axes.plot(stretch, energy, color=BLUE, label="$E(Q)$")
    _set_limits(axes, stretch, energy, error if difference_error is None else difference_error)
    axes.axvline(0.0, color=GREY, linewidth=0.8, label="isotropic hole")
    axes.axvline(mass_stretch, color=GREEN, linewidth=0.8, linestyle="-.", label="hole shaped as the mass")
    if minimum is not None and minimum.interior:
        _mark_minimum(axes, stretch, minimum, angle_degrees)
        _reach_down_to(axes, minimum.energy.value)
    axes.set(xlabel=rf"stretch $Q$ of the hole at $\theta={angle_degrees:.4g}°$", ylabel=ENERGY_LABEL)
    _aspect_ratio_axis(axes)
    axes.set_title(_findings(minimum, verdict))
    legend_below(axes, ncols=2, columnspacing=0.8, handlelength=1.6)
    return axes


def _draw_band(axes: Axes, stretch: Array, energy: Array, error: Array, *, alpha: float, label: str) -> None:
    low, high = energy - error, energy + error
    axes.fill_between(stretch, low, high, color=BLUE, alpha=alpha, linewidth=0.0, label=label)


def _set_limits(axes: Axes, stretch: Array, energy: Array, error: Array) -> None:
    """The curve fills the frame, however wide the band of its common error."""
    low, high = float(np.min(energy - error)), float(np.max(energy + error))
    margin = 0.08 * (high - low)
    axes.set(xlim=(stretch[0], stretch[-1]), ylim=(low - margin, high + margin))


def _reach_down_to(axes: Axes, energy: float) -> None:
    """A minimum off the line lies below the curve."""
    low, high = axes.get_ylim()
    if energy < low:
        axes.set_ylim(energy - 0.08 * (high - energy), high)


def _mark_minimum(axes: Axes, stretch: Array, minimum: Minimum, angle_degrees: float) -> None:
    turn = 2.0 * math.radians(angle_degrees)
    direction = np.array([math.cos(turn), math.sin(turn)])
    flat = np.array(minimum.metric.flat_coordinates)
    position = float(flat @ direction)
    on_line = abs(float(flat @ [-direction[1], direction[0]])) < _ON_LINE
    label = "minimum" if on_line else "minimum, off this line"
    bar = axes.errorbar(
        position, minimum.energy.value, xerr=minimum.stretch.error, yerr=minimum.energy.error, fmt="o",
        color=VERMILION, markerfacecolor=VERMILION if on_line else "white", label=label, zorder=4,
    )  # fmt: skip
    bar.lines[0].set_clip_on(False)
    if on_line:
        stiffness = _stiffness_along(minimum, direction)
        parabola = minimum.energy.value + 0.5 * stiffness.value * (stretch - position) ** 2
        label = f"stiffness $K={value_with_error(stiffness)}$"
        axes.plot(stretch, parabola, color=VERMILION, linewidth=0.9, linestyle="--", label=label)


def _stiffness_along(minimum: Minimum, direction: Array) -> Estimate:
    """u.K.u; its error adds those of the elements, exact for lines along the axes or diagonals of the lab."""
    pairs = np.outer(direction, direction)
    value = float(np.sum(pairs * minimum.stiffness))
    return Estimate(value, float(np.sum(np.abs(pairs) * minimum.stiffness_error)))


def _aspect_ratio_axis(axes: Axes) -> None:
    """Aspect ratios on top; 1/2 is an ellipse of ratio 2 turned by a right angle."""
    low, high = axes.get_xlim()
    for ladder in _RATIO_LADDERS:
        ratios = {math.log(r): f"{r:.4g}" for r in ladder} | {-math.log(r): f"1/{r:.4g}" for r in ladder[1:]}
        ticks = {q: words for q, words in sorted(ratios.items()) if low <= q <= high}
        if len(ticks) >= _LEAST_TICKS:
            break
    # Ticks nearest to the circle first; those that would run into one already there are left out.
    kept: dict[float, str] = {}
    for q in sorted(ticks, key=abs):
        if all(abs(q - other) > _LEAST_TICK_DISTANCE * (high - low) for other in kept):
            kept[q] = ticks[q]
    top = axes.secondary_xaxis("top")
    top.set_xticks(list(kept), labels=list(kept.values()))
    top.set_xlabel("aspect ratio $e^Q$")


def _findings(minimum: Minimum | None, verdict: str) -> str:
    words = VERDICT_WORDS[verdict]
    if minimum is None:
        return words
    if not minimum.interior:
        return f"{words}\nno minimum inside the range searched"
    angle = f", $\\theta^*=${degrees_with_error(minimum.angle)}" if minimum.metric.stretch > 0.0 else ""
    return (
        f"{words}\n"
        f"$Q^*={value_with_error(minimum.stretch)}$ (ratio {value_with_error(minimum.aspect_ratio)}){angle}\n"
        f"gain on isotropic hole {value_with_error(minimum.gain_isotropic)}\n"
        f"gain on hole shaped as the mass {value_with_error(minimum.gain_mass)}\n"
        f"gains and stiffness in {ENERGY_UNIT} per electron"
    )
