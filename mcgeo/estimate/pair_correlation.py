"""Pair correlation: on the plane from S(q), along the radius, and counted directly.

On a torus of N electrons g(r) = 1 + (1/N) sum_q (S(q) - 1) exp(iq.r), the term q = 0 being -1: the cell's mean of g is
1 - 1/N, the chance of another electron. In the thermodynamic limit g -> 1 at large r.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaln, j0

from mcgeo.estimate.occupations import PairOccupations
from mcgeo.estimate.statistics import jackknife_error, jackknife_means
from mcgeo.estimate.structure_factor import Curve
from mcgeo.estimate.torus_energy import soft_window
from mcgeo.geometry.frame import TorusFrame
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.landau_level import Orbit

Array = NDArray[np.float64]

_RADIAL_NODES = 200
_N_ANGLES = 96


def torus_pair_correlation(
    frame: TorusFrame, q_max: float, n_electrons: int, samples: Array, positions: Array
) -> tuple[Array, Array]:
    """g at lab positions from the waves of the half-plane.

    Parameters
    ----------
    samples : ndarray, shape (n_samples, n_waves)
        Independent samples of S(q).
    positions : ndarray, shape (n, 2)

    Returns
    -------
    value, error : ndarray, shape (n,)
    """
    waves = frame.waves(q_max)
    window = soft_window(np.sqrt(frame.metric.wavevector_norm_sq(waves.vectors)), q_max)
    kernel = 2.0 * window[:, None] * np.cos(waves.vectors @ np.asarray(positions).T) / n_electrons
    mean = 1.0 - 1.0 / n_electrons + (samples.mean(axis=0) - 1.0) @ kernel
    return np.asarray(mean), jackknife_error((jackknife_means(samples) - 1.0) @ kernel)


def radial_pair_correlation(
    frame: TorusFrame, q_max: float, n_electrons: int, samples: Array, radii: Array
) -> Curve:
    """g averaged over directions at |r|_g, in the liquid's own metric: exp(iq.r) becomes J_0(|q|_g |r|_g)."""
    norm = np.sqrt(frame.metric.wavevector_norm_sq(frame.waves(q_max).vectors))
    kernel = 2.0 * soft_window(norm, q_max)[:, None] * j0(norm[:, None] * radii) / n_electrons
    mean = 1.0 - 1.0 / n_electrons + (samples.mean(axis=0) - 1.0) @ kernel
    return Curve(radii, np.asarray(mean), jackknife_error((jackknife_means(samples) - 1.0) @ kernel))


def counted_pair_correlation(
    frame: TorusFrame, n_electrons: int, width: float, counts: Array, n_configurations: int
) -> Curve:
    """g from pair counts, bin by bin; an empty bin is 0 with error 0.

    Parameters
    ----------
    width : float
        Bin width in l_B, in the liquid's metric.
    counts : ndarray, shape (n_samples, n_bins)
        Pairs counted in each independent sample of ``n_configurations`` configurations.

    Notes
    -----
    A bin of area a holds (N^2/2) (a/A) g pairs per configuration, normalised as `torus_pair_correlation`.
    """
    edges = width * np.arange(counts.shape[1] + 1)
    ring = math.pi * np.diff(edges**2)
    expected = n_configurations * 0.5 * n_electrons**2 * ring / frame.isotropic.area
    samples = counts / expected
    centre = np.sqrt(0.5 * (edges[1:] ** 2 + edges[:-1] ** 2))
    return Curve(centre, samples.mean(axis=0), jackknife_error(jackknife_means(samples)))


def bulk_radial_pair_correlation(occupations: PairOccupations, radii: Array) -> Curve:
    """g(r) = sum_m (2/m!) (r^2/4)^m exp(-r^2/4) n_m of the infinite liquid in its own metric."""
    m = occupations.m.astype(float)[:, None]
    x = np.asarray(radii, dtype=float) ** 2 / 4.0
    with np.errstate(divide="ignore"):
        log_weight = np.where(m > 0, m * np.log(x), 0.0) - x - gammaln(m + 1.0)
    basis = 2.0 * np.exp(log_weight)
    uncorrelated = 1.0 + occupations.statistics_sign * np.exp(-2.0 * x)
    samples = occupations.samples @ basis
    return Curve(radii, uncorrelated + samples.mean(axis=0), jackknife_error(jackknife_means(samples)))


def bulk_pair_correlation_maps(
    occupations: PairOccupations,
    coefficients: Array,
    hole_metric: UnimodularMetric,
    orbit: Orbit,
    x: Array,
    y: Array,
) -> Array:
    """g(x, y) of the electrons of the infinite liquid, hole and orbit of different shapes.

    The electron's own orbit is folded in: S(q) - 1 = F(q)^2 (Sbar(|q|_g) - 1) for q != 0, and
    g(r) = 1 + (2 pi/nu) int d^2q/(2 pi)^2 (S(q) - 1) cos(q.r).

    Parameters
    ----------
    coefficients : ndarray, shape (n, n_m)
        Sets of c_m: the mean, or jackknife means.
    x, y : ndarray, shapes (n_x,) and (n_y,)

    Returns
    -------
    ndarray, shape (n, n_y, n_x)
    """
    # In the orbit's coordinates q = S_L p the form factor of the lowest state is isotropic; it cuts the integral.
    nodes, weights = np.polynomial.legendre.leggauss(_RADIAL_NODES)
    p = 0.5 * orbit.reach * (nodes + 1.0)
    phi = math.pi * (np.arange(_N_ANGLES) + 0.5) / _N_ANGLES
    q = (p[:, None, None] * (np.stack([np.cos(phi), np.sin(phi)], axis=-1) @ orbit.metric.linear_map.T)).reshape(-1, 2)
    # (2 pi/nu)/(2 pi)^2 times the angular step 2 pi/n.
    measure = np.repeat(0.5 * orbit.reach * weights * p, _N_ANGLES) / (float(occupations.filling) * _N_ANGLES)
    measure *= orbit.form_factor_sq(q)
    basis = occupations.basis(np.sqrt(hole_metric.wavevector_norm_sq(q)))
    limit = occupations.statistics_sign * float(occupations.filling)
    # cos(q.r) = cos(qx x) cos(qy y) - sin sin: a map is two matrix products.
    cos_x, sin_x = np.cos(np.outer(q[:, 0], x)), np.sin(np.outer(q[:, 0], x))
    cos_y, sin_y = np.cos(np.outer(y, q[:, 1])), np.sin(np.outer(y, q[:, 1]))
    maps = [
        1.0 + (cos_y * weight) @ cos_x - (sin_y * weight) @ sin_x
        for weight in (measure * (limit + c @ basis) for c in coefficients)
    ]
    return np.array(maps)
