"""The neutralising background of a droplet: a uniform ellipse of the droplet's metric.

A droplet of N electrons at filling nu is neutralised by the ellipse r.g.r <= R^2 = 2N/nu of density rho = nu/2 pi. In
the isotropic coordinates r' = S r it is a disk, and 1/|r| = 1/|S^-1 r'| has the Fourier transform
2 pi/(|q'| c(theta)), c(theta)^2 = n.g.n for the unit vector n at angle theta. With the transform
2 pi R J_1(q'R)/q' of the disk and int_0^inf J_1(qR) cos(qs) dq/q = sqrt(1 - s^2/R^2) (zero for s > R; DLMF 10.22.61)

    V(r) = -rho R int_0^2pi dtheta/c(theta) sqrt(max(0, 1 - (r'/R)^2 cos^2(theta - phi'))).

Every Fourier component of 1/c(theta) but the mean f = 1/AGM(e^(Q/2), e^(-Q/2)) gives a term that turns with phi'. So in
a state whose density is rotation symmetric in r' (any lowest-level droplet of definite angular momentum) the mean of
V is f times that of the isotropic disk; in the same way the mean of 1/|r_ij| is f <1/|r'_ij|>, and E_bb = f E_bb(disk).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import agm

from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric

Array = NDArray[np.float64]

# Nodes of the double-exponential rule (Takahasi and Mori, Publ. RIMS 9, 721 (1974)) on each half of the circle.
_NODES = 161
_LARGEST_NODE = 3.2


def stretch_factor(metric: UnimodularMetric) -> float:
    """f = 1/AGM(e^(Q/2), e^(-Q/2)): mean of |r'|/|r| over directions."""
    return 1.0 / float(agm(math.exp(0.5 * metric.stretch), math.exp(-0.5 * metric.stretch)))


def _double_exponential(upper: float) -> tuple[Array, Array]:
    """Nodes and weights on (0, upper) for integrands with singular ends."""
    t = np.linspace(-_LARGEST_NODE, _LARGEST_NODE, _NODES)
    inner = 0.5 * math.pi * np.sinh(t)
    nodes = upper / (1.0 + np.exp(-2.0 * inner))
    weights = 0.25 * math.pi * upper * np.cosh(t) / np.cosh(inner) ** 2 * (t[1] - t[0])
    return nodes, weights


@dataclass(frozen=True)
class NeutralisingEllipse:
    """Uniform ellipse that neutralises ``n_electrons`` at ``filling``, of the shape r.g.r = const of ``metric``."""

    n_electrons: int
    filling: Fraction
    metric: UnimodularMetric = ISOTROPIC

    @property
    def density(self) -> float:
        """rho = nu/2 pi."""
        return float(self.filling) / (2.0 * math.pi)

    @property
    def radius(self) -> float:
        """R = sqrt(2N/nu) of the disk in isotropic coordinates; the semi-axes are R e^(Q/2) and R e^(-Q/2)."""
        return math.sqrt(2.0 * self.n_electrons / float(self.filling))

    @property
    def self_energy(self) -> float:
        """E_bb = f 8 N^2/(3 pi R), of the whole background."""
        return stretch_factor(self.metric) * 8.0 * self.n_electrons**2 / (3.0 * math.pi * self.radius)

    @property
    def potential_scale(self) -> float:
        """-4 rho R f: what the profile of the disk is multiplied with to give the mean potential on a circle of r'."""
        return -4.0 * self.density * self.radius * stretch_factor(self.metric)

    def potential(self, positions: ArrayLike) -> Array:
        """Energy of an electron at lab positions of shape (..., 2) in the field of the ellipse, by quadrature.

        Relative error below 1e-12 inside, outside and on the edge.
        """
        image = np.asarray(positions, dtype=float) @ self.metric.linear_map.T
        u = np.hypot(image[..., 0], image[..., 1])[..., None] / self.radius
        direction = np.arctan2(image[..., 1], image[..., 0])[..., None]
        total = np.zeros(u.shape[:-1])
        nodes, weights = _double_exponential(0.5 * math.pi)
        # cos psi = cos chi / max(1, u) ends the range where the root vanishes; psi runs over the four quadrants.
        sine, cosine = np.sin(nodes), np.cos(nodes)
        opposite = np.sqrt(np.maximum(u, 1.0) ** 2 - 1.0 + sine**2)
        psi = np.arctan2(opposite, cosine)
        root = np.sqrt(np.maximum(0.0, 1.0 - u**2) + (np.minimum(u, 1.0) * sine) ** 2)
        measure = weights * root * sine / opposite
        for angle in (psi, -psi, math.pi - psi, psi - math.pi):
            n = np.stack([np.cos(direction + angle), np.sin(direction + angle)], axis=-1)
            total += np.sum(measure / np.sqrt(self.metric.position_norm_sq(n)), axis=-1)
        return -self.density * self.radius * total
