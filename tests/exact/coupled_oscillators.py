"""Electrons of a parabolic well in a tilted field by diagonalisation in a product of two plain oscillators.

Lengths in l_B, energies in hbar omega_c of the field across the plane. P_x, P_y (with [P_x, P_y] = -i) are one
oscillator, z and p_z the other; nothing is used of the normal modes of the coupled problem.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import expm

Matrix = NDArray[np.complex128]

_LARGER = 60


def _lowering(n: int) -> Matrix:
    return np.diag(np.sqrt(np.arange(1.0, n)), 1).astype(complex)


def _operators(n: int) -> tuple[Matrix, Matrix, Matrix, Matrix]:
    """P_x, P_y of the first oscillator, and x, p of a plain one, in n states."""
    a = _lowering(n)
    position, momentum = (a + a.conj().T) / np.sqrt(2.0), (a - a.conj().T) / (1j * np.sqrt(2.0))
    # [P_x, P_y] = -i: P_x takes the place of a momentum, P_y of a position.
    return momentum, position, position, momentum


class CoupledOscillators:
    """H = (P + z t).M.(P + z t)/2 + p_z^2/(2 mu) + mu Omega^2 z^2/2 in n^2 product states.

    Parameters
    ----------
    inverse_mass : ndarray, shape (2, 2)
        M = g_m^-1.
    in_plane_field : tuple of float
        B_x/B_z and B_y/B_z; t = (B_y, -B_x)/B_z.
    """

    def __init__(
        self,
        inverse_mass: NDArray[np.float64],
        in_plane_field: tuple[float, float],
        confinement: float,
        mass_across: float,
        n: int = 24,
    ) -> None:
        self.n = n
        self.length = 1.0 / np.sqrt(mass_across * confinement)
        # Squares are taken in more states and cut afterwards, so that the edge of the basis does no harm.
        p_x, p_y, x, p = _operators(n + 4)
        one = np.eye(n)

        def cut(matrix: Matrix) -> Matrix:
            return matrix[:n, :n]

        z = self.length * x
        shift = (in_plane_field[1], -in_plane_field[0])
        planar = [p_x, p_y]
        total = np.kron(one, cut(p @ p) / (2.0 * mass_across * self.length**2))
        total = total + np.kron(one, 0.5 * mass_across * confinement**2 * cut(z @ z))
        for i in range(2):
            for j in range(2):
                m = 0.5 * inverse_mass[i, j]
                total = total + m * np.kron(cut(planar[i] @ planar[j]), one)
                total = total + m * np.kron(cut(shift[j] * planar[i] + shift[i] * planar[j]), cut(z))
                total = total + m * shift[i] * shift[j] * np.kron(one, cut(z @ z))
        self.energies, self.states = np.linalg.eigh(total)

    def state_of_energy(self, energy: float, tolerance: float = 1e-6) -> NDArray[np.complex128]:
        """The only state of this energy."""
        found = np.flatnonzero(np.abs(self.energies - energy) < tolerance)
        assert len(found) == 1, (energy, self.energies[:8])
        return np.asarray(self.states[:, found[0]])

    def form_factor_sq(self, state: NDArray[np.complex128], q: tuple[float, float, float]) -> float:
        """|<exp(i (q_x P_y - q_y P_x + q_z z))>|^2: r less the guiding centre is (P_y, -P_x)."""
        p_x, p_y, x, _ = _operators(_LARGER)
        planar = expm(1j * (q[0] * p_y - q[1] * p_x))[: self.n, : self.n]
        across = expm(1j * q[2] * self.length * x)[: self.n, : self.n]
        square = state.reshape(self.n, self.n)
        return float(np.abs(np.sum(square.conj() * (planar @ square @ across.T))) ** 2)
