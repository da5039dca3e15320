"""What a trial state of a droplet in the plane supplies, and what all droplets share."""

from __future__ import annotations

import math
from typing import Protocol

import numpy as np

from mcgeo.geometry.ellipse import NeutralisingEllipse
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.states.base import Array, SampledState


class DropletState(SampledState, Protocol):
    """A lowest-level droplet of definite angular momentum, rotation symmetric in the coordinates of its own metric.

    Its polynomial depends on differences of coordinates only: the centre of mass is in the lowest orbital.
    Walkers hold these isotropic coordinates r' = S r (l_B) in their ``a`` (x') and ``b`` (y').
    """

    @property
    def metric(self) -> UnimodularMetric:
        """g."""

    @property
    def background(self) -> NeutralisingEllipse:
        """The neutralising charge."""

    @property
    def angular_momentum(self) -> int:
        """Total angular momentum in the isotropic coordinates, the degree of the polynomial."""

    @property
    def largest_orbital(self) -> int:
        """Largest power of one coordinate: orbitals z^k beyond are empty."""

    @property
    def pair_momenta(self) -> range:
        """Relative angular momenta that a pair can have."""


def mean_square_radius(state: DropletState) -> float:
    """Exact <r'^2> per electron: the orbital z^k has 2 (k + 1), so 2 (L/N + 1)."""
    return 2.0 * (state.angular_momentum / state.n_electrons + 1.0)


def uniform_in_disk(rng: np.random.Generator, n: int, radius: float) -> tuple[Array, Array]:
    """n points uniform in a disk."""
    r = radius * np.sqrt(rng.random(n))
    phi = 2.0 * math.pi * rng.random(n)
    return r * np.cos(phi), r * np.sin(phi)
