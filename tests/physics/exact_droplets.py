"""Occupations of small droplets as rational numbers, in the form in which the package takes them."""

from __future__ import annotations

from fractions import Fraction

import numpy as np

from mcgeo.estimate.droplet_occupations import DropletOccupations
from tests.exact.droplet_expansion import droplet, orbital_occupations, pair_probabilities

Key = tuple[str, int, int]


def exact_occupations(key: Key) -> DropletOccupations:
    """One sample without error of (kind, exponent, electrons)."""
    polynomial = droplet(*key)
    orbitals, pairs = orbital_occupations(polynomial), pair_probabilities(polynomial)
    return DropletOccupations(
        key[2],
        Fraction(1, key[1]),
        np.array(list(pairs)),
        np.array([orbitals], dtype=float),
        np.array([list(pairs.values())], dtype=float),
    )
