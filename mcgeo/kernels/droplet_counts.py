"""What is measured in droplets of eight walkers: Coulomb sums, radial density, pair distances, second moments.

Positions are in the isotropic coordinates r' of the droplet's metric g; a displacement in the lab has
|r|^2 = r'.g^-1.r' because the map S with r' = S r is symmetric and S S = g.

Where electrons may meet (Moore-Read bosons) the variance of 1/r is infinite. Since Psi is a polynomial, the density of
pairs at r averaged over directions is a power series in r^2. So 1/r may be exchanged below a radius c for
(6 - 16 s + 12 s^2)/c, s = (r/c)^2, which has the same integrals with 1, r^2 and r^4; what is left is -0.0071 c^7 times
the coefficient of r^6, below 1e-6 of an energy per electron for c = 1/2.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.lanes import (
    LANES,
    bits_from_float,
    float_from_bits,
    integer_from_float,
    load,
    select,
    shift_right,
    splat,
    splat_bits,
    store,
)

# Start of the iteration for 1/sqrt(x): halves and negates the exponent, error below 3.5 %.
_INVERSE_ROOT_BITS = 0x5FE6EB50C7B537A9
_ROOT_STEPS = 4
# Seven steps of the mean take complementary moduli squared down to this value to the last bit.
_MEAN_STEPS = 7
_SMALLEST_COMPLEMENT = 1e-14
# c in the direction in which the density of pairs changes fastest.
_CLOSE = 0.5


@kernel
def inverse_root(x: Any) -> Any:
    """1/sqrt(x) per lane by Newton's iteration, for positive normal x; some large number for x = 0."""
    y = float_from_bits(splat_bits(_INVERSE_ROOT_BITS) - shift_right(bits_from_float(x), 1))
    half = x * 0.5
    for _ in range(_ROOT_STEPS):
        y = y * (1.5 - half * y * y)
    return y


@kernel
def disk_profile(u_sq: Any) -> Any:
    """Potential of a uniform disk in its own plane at u = r/R, in units of -4 rho R.

    E(u^2) inside and u [E(1/u^2) - (1 - 1/u^2) K(1/u^2)] outside, complete elliptic integrals of parameter k^2,
    by the arithmetic-geometric mean (DLMF 19.8.5 and 19.8.6).
    """
    inside = u_sq < splat(1.0)
    parameter = select(inside, u_sq, 1.0 / u_sq)
    complement = 1.0 - parameter
    complement = select(complement < splat(_SMALLEST_COMPLEMENT), splat(_SMALLEST_COMPLEMENT), complement)
    mean, geometric = splat(1.0), complement * inverse_root(complement)
    deficit, weight = parameter * 0.5, 1.0
    for _ in range(_MEAN_STEPS):
        product = mean * geometric
        half_difference = (mean - geometric) * 0.5
        mean = (mean + geometric) * 0.5
        geometric = product * inverse_root(product)
        deficit = deficit + half_difference * half_difference * weight
        weight = 2.0 * weight
    first = (0.5 * math.pi) / mean
    second = first - first * deficit
    return select(inside, second, u_sq * inverse_root(u_sq) * (second - complement * first))


@kernel
def smoothed_coulomb(distance_sq: Any, close: float) -> Any:
    """1/r from r^2, smoothed below ``close``; see the module."""
    scale = 1.0 / close
    s = distance_sq * (scale * scale)
    inner = (s * (s * 12.0 - 16.0) + 6.0) * scale
    return select(s < splat(1.0), inner, inverse_root(distance_sq))


@kernel
def _isotropic_pair_sum(x: np.ndarray, y: np.ndarray) -> Any:
    total = splat(0.0)
    for i in range(x.shape[0]):
        px, py = load(x, i), load(y, i)
        for j in range(i):
            dx, dy = load(x, j) - px, load(y, j) - py
            total = total + smoothed_coulomb(dx * dx + dy * dy, _CLOSE)
    return total


@kernel
def _lab_pair_sum(x: np.ndarray, y: np.ndarray, g_xx: float, g_xy: float, g_yy: float) -> Any:
    total = splat(0.0)
    # The short axis of the unit circle of r' in the lab is 1 over the root of the metric's largest eigenvalue.
    half_trace = 0.5 * (g_xx + g_yy)
    close = _CLOSE / math.sqrt(half_trace + math.sqrt(half_trace * half_trace - 1.0))
    for i in range(x.shape[0]):
        px, py = load(x, i), load(y, i)
        for j in range(i):
            dx, dy = load(x, j) - px, load(y, j) - py
            distance_sq = dx * (dx * g_xx + dy * (2.0 * g_xy)) + dy * dy * g_yy
            total = total + smoothed_coulomb(distance_sq, close)
    return total


@kernel
def coulomb_sums(x: np.ndarray, y: np.ndarray, inverse_metric: np.ndarray, radius: float, out: np.ndarray) -> None:
    """The three sums behind a droplet's energy.

    Parameters
    ----------
    x, y : ndarray, shape (n_electrons, 8)
        Isotropic coordinates in l_B.
    inverse_metric : ndarray, shape (2, 2)
        g^ab.
    radius : float
        R of the isotropic background disk.
    out : ndarray, shape (3, 8)
        Written: sum_{i<j} 1/|r'_ij|; sum_{i<j} 1/|r_ij| in the lab; sum_i of `disk_profile` at r'_i.
    """
    g_xx, g_xy, g_yy = inverse_metric[0, 0], inverse_metric[0, 1], inverse_metric[1, 1]
    isotropic = _isotropic_pair_sum(x, y)
    store(out, 0, isotropic)
    if g_xx == 1.0 and g_yy == 1.0:
        store(out, 1, isotropic)
    else:
        store(out, 1, _lab_pair_sum(x, y, g_xx, g_xy, g_yy))
    profile = splat(0.0)
    scale = 1.0 / (radius * radius)
    for i in range(x.shape[0]):
        px, py = load(x, i), load(y, i)
        profile = profile + disk_profile((px * px + py * py) * scale)
    store(out, 2, profile)


@kernel
def add_second_moments(x: np.ndarray, y: np.ndarray, moments: np.ndarray) -> None:
    """Add the sums over electrons of x'^2, y'^2 and x'y' to ``moments``, shape (3, 8)."""
    xx, yy, xy = load(moments, 0), load(moments, 1), load(moments, 2)
    for i in range(x.shape[0]):
        px, py = load(x, i), load(y, i)
        xx, yy, xy = xx + px * px, yy + py * py, xy + px * py
    store(moments, 0, xx)
    store(moments, 1, yy)
    store(moments, 2, xy)


@kernel
def add_radial_counts(x: np.ndarray, y: np.ndarray, width: float, counts: np.ndarray) -> None:
    """Count electrons by |r'| in bins of ``width`` (l_B); the last bin takes all that lie beyond.

    Parameters
    ----------
    counts : ndarray of int64, shape (n_bins, 8)
        Updated.
    """
    last = counts.shape[0] - 1
    for i in range(x.shape[0]):
        for lane in range(LANES):
            radius = math.sqrt(x[i, lane] ** 2 + y[i, lane] ** 2)
            # What is no number counts as beyond too: made an index, it would be one outside of the array.
            counts[int(radius / width) if radius < last * width else last, lane] += 1


@kernel
def add_pair_counts(x: np.ndarray, y: np.ndarray, width: float, counts: np.ndarray) -> None:
    """Count pairs by |r'_ij| in bins of ``width`` (l_B); the last bin takes all that lie beyond.

    Parameters
    ----------
    counts : ndarray of int64, shape (n_bins, 8)
        Updated.
    """
    last = np.uint64(counts.shape[0] - 1)
    scale = 1.0 / width
    bins = np.empty((1, LANES), dtype=np.uint64)
    for i in range(x.shape[0]):
        px, py = load(x, i), load(y, i)
        for j in range(i):
            dx, dy = load(x, j) - px, load(y, j) - py
            distance_sq = dx * dx + dy * dy
            store(bins, 0, integer_from_float(distance_sq * inverse_root(distance_sq) * scale))
            for lane in range(LANES):
                counts[min(bins[0, lane], last), lane] += 1
