"""Energies, shape and density of a droplet from its block means.

In a stretched droplet the energies are those of the isotropic one times f = 1/AGM(e^(Q/2), e^(-Q/2)), each of the
three by itself; see `mcgeo.geometry.ellipse` for the argument. Every number here is per electron.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammainc

from mcgeo.estimate.statistics import Estimate, mean_estimate
from mcgeo.states.droplet import DropletState

Array = NDArray[np.float64]


@dataclass(frozen=True)
class DropletEnergies:
    """Energies per electron in e^2/(4 pi eps l_B).

    Attributes
    ----------
    total : Estimate
        With its own error: what electrons and background do fluctuates together.
    electron_electron, electron_background, background_background : Estimate
        The three parts; the last one is exact.
    electron_electron_lab : Estimate
        The first part once more from the pairs in the lab.
    """

    total: Estimate
    electron_electron: Estimate
    electron_background: Estimate
    background_background: Estimate
    electron_electron_lab: Estimate


def droplet_energies(
    state: DropletState, electron_electron: Array, electron_electron_lab: Array, electron_background: Array
) -> DropletEnergies:
    """Energies from independent samples of the means of `DropletMeasurement`, totals of shape (n_samples,)."""
    n = state.n_electrons
    background = state.background.self_energy / n
    return DropletEnergies(
        mean_estimate((electron_electron + electron_background) / n + background),
        mean_estimate(electron_electron / n),
        mean_estimate(electron_background / n),
        Estimate(background, 0.0),
        mean_estimate(electron_electron_lab / n),
    )


@dataclass(frozen=True)
class RadialDensity:
    """Mean density on rings in the isotropic coordinates.

    Attributes
    ----------
    edges : ndarray, shape (n_bins + 1,)
        Radii r' in l_B.
    density, error : ndarray, shape (n_bins,)
        Electrons per l_B^2.
    """

    edges: Array
    density: Array
    error: Array


def radial_density(
    counts: NDArray[np.float64] | NDArray[np.int64], n_configurations: int, bin_width: float
) -> RadialDensity:
    """Density from independent samples of the radial counts, shape (n_samples, n_bins)."""
    edges = bin_width * np.arange(counts.shape[1] + 1)
    samples = counts / (n_configurations * math.pi * np.diff(edges**2))
    return RadialDensity(edges, samples.mean(axis=0), samples.std(axis=0, ddof=1) / math.sqrt(len(samples)))


def electrons_on_rings(occupations: Array, edges: Array) -> Array:
    """Mean number of electrons between the radii for orbitals z^k exp(-|z|^2/4) filled with ``occupations`` n_k.

    Orbital k lies within r with probability P(k + 1, r^2/2), P the regularised incomplete gamma function (DLMF 8.2.4).
    """
    k = np.arange(len(occupations))
    inside = gammainc(k + 1.0, 0.5 * np.asarray(edges, dtype=float)[:, None] ** 2)
    return np.asarray(np.diff(inside @ np.asarray(occupations, dtype=float)))
