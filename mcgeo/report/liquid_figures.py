"""What the walkers measured: structure factor, radial pair correlation, pair occupations, block means."""

from __future__ import annotations

import math

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from mcgeo.estimate.statistics import Estimate
from mcgeo.report.numbers import value_with_error
from mcgeo.report.style import BLUE, GREEN, GREY, VERMILION, legend_below, new_axes, styled

Array = NDArray[np.float64]

# Walkers scatter more than their mean; the frame leaves out the few beyond this many standard deviations.
_SHOWN_SCATTER = 3.0


@styled
def structure_factor(
    q: Array,
    s: Array,
    error: Array,
    *,
    fit_q: Array | None = None,
    fit_s: Array | None = None,
    small_q: tuple[Array, Array] | None = None,
    small_q_label: str = "$q^2/2$",
    axes: Axes | None = None,
) -> Axes:
    """S(q) with error bars, the fit by pair occupations, and the long-wavelength law.

    Parameters
    ----------
    q, s, error : ndarray, shape (n,)
        |q| in 1/l_B in the liquid's own metric, S, its standard error.
    fit_q, fit_s : ndarray, shape (n_fit,), optional
    small_q : tuple of two ndarrays, optional
        q and S of the long-wavelength law.
    small_q_label : str
    axes : Axes, optional

    Returns
    -------
    Axes
    """
    axes = new_axes() if axes is None else axes
    axes.axhline(1.0, color=GREY, linewidth=0.6, linestyle=":")
    axes.errorbar(q, s, yerr=error, fmt="o", markersize=2.0, elinewidth=0.8, color=BLUE, label="sampled")
    limits = axes.get_ylim()
    if fit_q is not None and fit_s is not None:
        axes.plot(fit_q, fit_s, color=VERMILION, linewidth=0.8, label="fit by pair occupations", zorder=3)
    if small_q is not None:
        axes.plot(*small_q, color=GREEN, linewidth=1.0, linestyle="--", label=small_q_label, zorder=3)
    axes.set(ylim=(0.0, limits[1]), xlim=(0.0, None))
    axes.set(xlabel=r"$|q|\,\ell_B$ in the metric of the liquid", ylabel="structure factor $S(q)$")
    axes.legend(loc="lower right")
    return axes


@styled
def occupations(m: NDArray[np.int64], n: Array, error: Array, axes: Axes | None = None) -> Axes:
    """n_m with error bars; n_m = 1 is the uncorrelated gas.

    Parameters
    ----------
    m : ndarray of int64, shape (n_m,)
        Relative angular momenta.
    n, error : ndarray, shape (n_m,)
    axes : Axes, optional

    Returns
    -------
    Axes
    """
    axes = new_axes() if axes is None else axes
    axes.axhline(1.0, color=GREY, linewidth=0.8, linestyle="--", label="uncorrelated gas, $n_m=1$")
    axes.vlines(m, 1.0, n, color=BLUE, linewidth=2.0, alpha=0.4)
    axes.errorbar(m, n, yerr=error, fmt="o", color=BLUE, label="$n_m$")
    axes.set_ylim(bottom=min(0.0, float(np.min(n - error))) - 0.05)
    axes.set(xlabel="relative angular momentum $m$", ylabel="pair occupation $n_m$")
    axes.xaxis.set_major_locator(MaxNLocator(integer=True))
    legend_below(
        axes, ncols=2, title="single $n_m$ at large $m$ are poorly determined;\ntheir sums, and energies, are not"
    )
    return axes


@styled
def radial_pair_correlation(
    r: Array,
    g: Array,
    error: Array,
    *,
    histogram_r: Array | None = None,
    histogram_g: Array | None = None,
    histogram_error: Array | None = None,
    label: str = "from $S(q)$",
    axes: Axes | None = None,
) -> Axes:
    """g(r) with its error band, and beside it the directly counted pairs.

    Parameters
    ----------
    r, g, error : ndarray, shape (n,)
        |r| in l_B in the liquid's own metric, g, its standard error.
    histogram_r, histogram_g, histogram_error : ndarray, shape (n_bins,), optional
        Counted pairs; bins without error are empty ones and stay blank.
    label : str
        Where g comes from.
    axes : Axes, optional

    Returns
    -------
    Axes
    """
    axes = new_axes() if axes is None else axes
    axes.axhline(1.0, color=GREY, linewidth=0.6, linestyle=":")
    axes.fill_between(r, g - error, g + error, color=BLUE, alpha=0.35, linewidth=0.0, label="its error")
    axes.plot(r, g, color=BLUE, zorder=4, label=label)
    if histogram_r is not None and histogram_g is not None and histogram_error is not None:
        filled = histogram_error > 0.0
        axes.errorbar(
            histogram_r[filled], histogram_g[filled], yerr=histogram_error[filled], fmt="o", markersize=3.0,
            markerfacecolor="none", markeredgewidth=0.5, elinewidth=0.8, color=VERMILION, label="counted pairs",
        )  # fmt: skip
    axes.set(xlim=(0.0, r[-1]), ylim=(min(0.0, float(np.min(g - error))), None))
    axes.set(xlabel=r"$|r|\,/\,\ell_B$ in the metric of the liquid", ylabel="pair correlation $g(r)$")
    axes.legend(loc="lower right")
    return axes


@styled
def radial_density(
    r: Array, density: Array, error: Array, *, background: float, edge: float, axes: Axes | None = None
) -> Axes:
    """Density of a droplet along the radius, with the neutralising background.

    Parameters
    ----------
    r, density, error : ndarray, shape (n,)
        r' in l_B in the droplet's own metric, electrons per l_B^2, standard error.
    background : float
        Density of the background inside ``edge``.
    edge : float
        Its radius in l_B.
    axes : Axes, optional

    Returns
    -------
    Axes
    """
    axes = new_axes() if axes is None else axes
    axes.step([0.0, edge, edge, r[-1]], [background, background, 0.0, 0.0], color=GREY, label="background")
    axes.errorbar(r, density, yerr=error, fmt="o", markersize=2.0, elinewidth=0.8, color=BLUE, label="electrons")
    axes.set(xlabel=r"$r'\,/\,\ell_B$ in the metric of the droplet", ylabel=r"density $\times\,\ell_B^2$")
    axes.set(xlim=(0.0, r[-1]), ylim=(0.0, None))
    axes.legend()
    return axes


@styled
def block_trace(blocks: Array, *, mean: float, error: float, tau: float, label: str, axes: Axes | None = None) -> Axes:
    """Block means of every walker, their mean over walkers, and the overall mean: drift and outliers show.

    Parameters
    ----------
    blocks : ndarray, shape (n_blocks, n_walkers)
    mean, error : float
        Overall mean and its standard error.
    tau : float
        Integrated autocorrelation time in sweeps.
    label : str
        Of the observable, with its unit.
    axes : Axes, optional

    Returns
    -------
    Axes
    """
    axes = new_axes(height=3.2) if axes is None else axes
    n_blocks, n_walkers = blocks.shape
    number = np.arange(1, n_blocks + 1)
    axes.plot(number, blocks, color=GREY, linewidth=0.4, alpha=0.4, rasterized=True, zorder=1)
    axes.lines[0].set_label("walkers")
    low, high = mean - error, mean + error
    axes.axhspan(low, high, color=VERMILION, alpha=0.6, linewidth=0.0, zorder=4, label="overall mean")
    axes.axhline(mean, color=VERMILION, linewidth=0.6, zorder=4)
    over_walkers = blocks.mean(axis=1)
    if n_walkers > 1:
        scatter = blocks.std(axis=1, ddof=1) / math.sqrt(n_walkers)
        axes.errorbar(
            number, over_walkers, yerr=scatter, fmt="o", markersize=2.5, elinewidth=0.8, color=BLUE, zorder=3,
            label="mean over walkers",
        )  # fmt: skip
    spread = max(_SHOWN_SCATTER * float(blocks.std()), 2.0 * error)
    axes.set(xlim=(0.5, n_blocks + 0.5), ylim=(mean - spread, mean + spread))
    axes.set(xlabel="block", ylabel=label)
    axes.xaxis.set_major_locator(MaxNLocator(integer=True))
    axes.set_title(f"mean {value_with_error(Estimate(mean, error))}\nautocorrelation time {tau:.3g} sweeps")
    legend_below(axes, ncols=3, columnspacing=1.0, handlelength=1.4)
    return axes
