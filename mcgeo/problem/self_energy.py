"""Self-energy of a charge on a torus for any V(q), from V(q) alone.

By Poisson's formula the sum over the cell's wavevectors less the integral over all of them is the sum over images,

    xi = lim_{r -> 0} [(1/A) sum_{q != 0} V(q) e^{iq.r} - V(r)]
       = lim_{chi -> 1} [(1/A) sum_{q != 0} V(q) chi(q) - int d^2q/(2 pi)^2 V(q) chi(q)].

With the window chi(q) = erfc((q - q_0)/w)/2, V(q) (1 - chi(q)) is smooth for a V that is smooth beyond q = 0, and its
transform at the nearest image, at distance R, is of the order exp(-w^2 R^2/4): w R = 12 leaves rounding only,
whatever V does at small q.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from scipy.special import erfc

from mcgeo.geometry.cell import Cell, lattice_points

Array = NDArray[np.float64]

_WIDTH = 12.0
# Window at q = 0 differs from 1, and at the end from 0, by erfc(6)/2 = 1e-17.
_REACH = 6.0
_HALVINGS = 50
_NODES = 32


def windowed_self_energy(potential: Callable[[Array], Array], cell: Cell, n_directions: int) -> float:
    """xi of the cell, to about 1e-13 of V(r) at the nearest image and of q_0/2 pi for a V(q) smooth beyond q = 0.

    Parameters
    ----------
    potential : callable
        V(q) for wavevectors of shape (..., 2), none of them zero, with q V(q) bounded.
    cell : Cell
    n_directions : int
        Equidistant directions, on half a turn, of the integral; one for an isotropic V.
    """
    lattice, _ = cell.reduced()
    width = _WIDTH / lattice.side
    largest = 2.0 * _REACH * width
    waves = lattice_points(np.asarray(2.0 * math.pi * np.linalg.inv(lattice.vectors).T), largest)
    lengths = np.hypot(waves[:, 0], waves[:, 1])
    total = np.sum(potential(waves) * _window(lengths, width)) / lattice.area
    radii, weights = _graded_rule(largest)
    angles = math.pi * np.arange(n_directions) / n_directions
    directions = np.stack([np.cos(angles), np.sin(angles)], axis=-1)
    mean = potential(radii[:, None, None] * directions).mean(axis=1)
    return float(total - np.sum(weights * radii * mean * _window(radii, width)) / (2.0 * math.pi))


def _window(lengths: Array, width: float) -> Array:
    return np.asarray(0.5 * erfc(lengths / width - _REACH))


def _graded_rule(largest: float) -> tuple[Array, Array]:
    """Gauss-Legendre panels that halve towards zero, where an interaction may have any scale."""
    edges = np.concatenate([[0.0], largest * 0.5 ** np.arange(_HALVINGS, -1, -1)])
    nodes, weights = np.polynomial.legendre.leggauss(_NODES)
    half = 0.5 * np.diff(edges)[:, None]
    radii = edges[:-1, None] + half * (nodes + 1.0)
    return radii.ravel(), (half * weights).ravel()
