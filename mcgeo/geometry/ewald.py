"""Madelung self-energy of a charge with its periodic images and a neutralising background.

xi = lim_{r -> 0} [ (1/A) sum_{q != 0} V(q) e^{iq.r} - V(r) ] for V(r) = 1/sqrt(r.g_eps.r). The energy per electron of
a torus carries xi/2. For the unit square xi sqrt(A) = 4 zeta(1/2) beta(1/2) = -3.900264920001956 (Bonsall and
Maradudin, Phys. Rev. B 15, 1959 (1977); Ewald, Ann. Phys. 369, 253 (1921)).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.special import erfc

from mcgeo.geometry.cell import Cell, lattice_points
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric

# erfc(6.2) is 2e-18: both sums are cut where their terms are below the rounding of the total.
_CUT = 6.2


def _lattice_lengths(vectors: NDArray[np.float64], largest: float) -> NDArray[np.float64]:
    points = lattice_points(vectors, largest)
    return np.asarray(np.hypot(points[:, 0], points[:, 1]))


def madelung_self_energy(cell: Cell, dielectric_metric: UnimodularMetric = ISOTROPIC) -> float:
    """xi in e^2/(4 pi eps l_B) for V(r) = 1/sqrt(r.g_eps.r), to a relative 1e-14.

    The area-preserving map S of g_eps turns V into 1/r on the mapped lattice, which is then reduced, so that any
    cell and any dielectric metric converge alike.
    """
    lattice, _ = cell.mapped(dielectric_metric.linear_map).reduced()
    area = lattice.area
    split = math.sqrt(math.pi / area)
    direct = _lattice_lengths(lattice.vectors, _CUT / split)
    dual = _lattice_lengths(np.asarray(2.0 * math.pi * np.linalg.inv(lattice.vectors).T), 2.0 * split * _CUT)
    near = np.sum(erfc(split * direct) / direct)
    far = 2.0 * math.pi / area * np.sum(erfc(dual / (2.0 * split)) / dual)
    return float(near + far - 2.0 * split / math.sqrt(math.pi) - 2.0 * math.sqrt(math.pi) / (split * area))
