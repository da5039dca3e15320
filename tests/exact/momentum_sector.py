"""Particles in the N_phi orbitals |k> of a torus: states of one total momentum and their pair transitions.

The total momentum is the sum of the k modulo N_phi. A pair transition takes (a, b) to (a + d, b - d); nothing
here knows the lattice or the interaction.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from itertools import combinations, combinations_with_replacement

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, eq=False)
class MomentumSector:
    """Occupation states of one total momentum and every pair transition between them.

    Attributes
    ----------
    orbitals : ndarray of int, shape (n_states, n_electrons)
        Occupied k, ascending.
    row, column, shift, separation : ndarray of int, shape (n_transitions,)
        State ``column`` goes to state ``row`` when a pair (a, b), a - b = ``separation``, becomes
        (a + ``shift``, b - ``shift``), all modulo N_phi.
    weight : ndarray, shape (n_transitions,)
        Exchange sign for fermions, ratio of norms for bosons.
    """

    n_electrons: int
    n_flux: int
    momentum: int
    bosons: bool
    orbitals: NDArray[np.int64]
    row: NDArray[np.int64]
    column: NDArray[np.int64]
    shift: NDArray[np.int64]
    separation: NDArray[np.int64]
    weight: NDArray[np.float64]


def uniform_momentum(n_electrons: int, n_flux: int) -> int:
    """Sum of k, modulo N_phi, of the uniform liquid: p q n (n-1)/2 for N = p n, N_phi = q n."""
    n = math.gcd(n_electrons, n_flux)
    return (n_electrons * n_flux * (n - 1) // (2 * n)) % n_flux


@lru_cache(maxsize=32)
def momentum_sector(n_electrons: int, n_flux: int, momentum: int, bosons: bool = False) -> MomentumSector:
    """Build the states of total momentum ``momentum`` and their transitions; nothing here knows the lattice.

    Raises
    ------
    ValueError
        If the sector is empty.
    """
    choose = combinations_with_replacement if bosons else combinations
    states = np.array(list(choose(range(n_flux), n_electrons)), dtype=np.int64).reshape(-1, n_electrons)
    states = states[states.sum(axis=1) % n_flux == momentum % n_flux]
    if len(states) == 0:
        raise ValueError(f"no state of {n_electrons} particles in {n_flux} orbitals has momentum {momentum}")
    rank = {tuple(state): index for index, state in enumerate(states.tolist())}
    norm = np.array([_creation_norm(state) for state in states.tolist()])
    empty = np.zeros(0, dtype=np.int64)
    parts: list[tuple[NDArray[np.int64], ...]] = [(empty,) * 4]
    weights: list[NDArray[np.float64]] = [np.zeros(0)]
    shifts = np.arange(n_flux)
    for i, j in combinations(range(n_electrons), 2):
        moved = np.repeat(states[:, None, :], n_flux, axis=1)
        moved[:, :, i] = (moved[:, :, i] + shifts) % n_flux
        moved[:, :, j] = (moved[:, :, j] - shifts) % n_flux
        ordered = np.sort(moved, axis=2)
        column, shift = np.nonzero(np.all(np.diff(ordered, axis=2) > 0, axis=2) | bosons)
        row = np.array([rank[tuple(state)] for state in ordered[column, shift].tolist()], dtype=np.int64)
        separation = (states[column, i] - states[column, j]) % n_flux
        parts.append((row, column, shift, separation))
        weights.append(norm[row] / norm[column] if bosons else _permutation_sign(moved[column, shift]))
    row, column, shift, separation = (np.concatenate(part) for part in zip(*parts, strict=True))
    weight = np.concatenate(weights)
    return MomentumSector(
        n_electrons, n_flux, momentum % n_flux, bosons, states, row, column, shift, separation, weight
    )


def _creation_norm(state: list[int]) -> float:
    """Norm of a^+_k1 ... a^+_kN |0> for bosons."""
    return math.sqrt(math.prod(math.factorial(state.count(k)) for k in set(state)))


def _permutation_sign(rows: NDArray[np.int64]) -> NDArray[np.float64]:
    """Sign of the permutation that puts each row in ascending order."""
    inversions = np.zeros(len(rows), dtype=np.int64)
    for i, j in combinations(range(rows.shape[1]), 2):
        inversions += rows[:, i] > rows[:, j]
    return np.where(inversions % 2 == 0, 1.0, -1.0)
