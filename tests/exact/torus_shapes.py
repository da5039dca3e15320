"""Cells, metrics and wavevectors for exact diagonalisation, built without the package under test."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

ISOTROPIC = np.eye(2)
TAU = {"square": 1j, "hexagonal": complex(0.5, math.sqrt(3.0) / 2.0)}


def cell(tau: complex, n_flux: int) -> NDArray[np.float64]:
    """Rows L1 (along x) and L2 of the cell with L2 = tau L1 and area 2 pi N_phi, in l_B."""
    side = math.sqrt(2.0 * math.pi * n_flux / tau.imag)
    return side * np.array([[1.0, 0.0], [tau.real, tau.imag]])


def stretched(gamma: float, angle: float = 0.0) -> NDArray[np.float64]:
    """Metric R(angle) diag(gamma, 1/gamma) R(angle)^T."""
    turn = rotation(angle)
    return np.asarray(turn @ np.diag([gamma, 1.0 / gamma]) @ turn.T)


def rotation(angle: float) -> NDArray[np.float64]:
    """Matrix R(angle), counter-clockwise."""
    return np.array([[math.cos(angle), -math.sin(angle)], [math.sin(angle), math.cos(angle)]])


def waves(lattice: NDArray[np.float64], integers: list[tuple[int, int]]) -> NDArray[np.float64]:
    """Wavevectors with q.L1 = 2 pi m1, q.L2 = 2 pi m2, shape (n, 2), in 1/l_B."""
    return np.asarray(2.0 * math.pi * np.array(integers) @ np.linalg.inv(lattice).T)


def nonzero_residues(n_flux: int) -> list[tuple[int, int]]:
    """All (m1, m2) modulo N_phi but (0, 0): every pair operator once."""
    return [(m1, m2) for m1 in range(n_flux) for m2 in range(n_flux) if (m1, m2) != (0, 0)]
