"""A wavefunction given in coordinates, expanded in Slater determinants of Landau orbitals by evaluating it.

On the torus spanned by 1 and tau (in units of L1), with u = a + b tau and the Gaussian exp(-pi N_phi Im(tau) b^2) left
out, the lowest-level orbitals

    f_k(u) = sum_n exp(i pi tau N_phi (n + k/N_phi)^2 + 2 pi i N_phi (n + k/N_phi) u),    k = 0 ... N_phi - 1,

are orthogonal and of one norm; u -> u + 1/N_phi multiplies f_k by exp(2 pi i k/N_phi), and u -> u + tau/N_phi takes
it to f_k+1. An antisymmetric holomorphic function with their boundary conditions is a sum of their determinants: values
at more random points than there are determinants fix the coefficients, and what is left over tells whether it was
one. Orbitals: Haldane and Rezayi, Phys. Rev. B 31, 2529 (1985). None of this knows the package under test.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from tests.exact.momentum_sector import momentum_sector
from tests.exact.torus_diagonalisation import TorusState
from tests.exact.torus_shapes import cell

Complex = NDArray[np.complex128]
Wavefunction = Callable[[Complex], Complex]


def theta_1(u: Complex, tau: complex) -> Complex:
    """theta_1(pi u | tau) for |b| below 1.5, DLMF 20.2.1."""
    n = np.arange(6, -8, -1)
    coefficients = -1j * np.exp(1j * math.pi * (tau * (n + 0.5) ** 2 + n))
    half = np.exp(1j * math.pi * np.asarray(u))
    return np.asarray(np.polyval(coefficients, half**2) / half**13)


def centre_of_mass(total: Complex, tau: complex, exponent: int) -> Complex:
    """One of the m centre-of-mass factors: F(U + tau) = exp(-i pi m tau - 2 pi i m U) F(U)."""
    n = np.arange(-12, 13)
    return np.asarray(
        np.exp(1j * math.pi * tau * exponent * n**2 + 2j * math.pi * exponent * n * total[..., None]).sum(-1)
    )


def pair_product(u: Complex, tau: complex) -> Complex:
    """prod_{i<j} theta_1(u_i - u_j) for u of shape (n_points, n_electrons)."""
    first, second = np.triu_indices(u.shape[1], 1)
    return np.asarray(np.prod(theta_1(u[:, first] - u[:, second], tau), axis=1))


def laughlin(tau: complex, exponent: int) -> Wavefunction:
    return lambda u: pair_product(u, tau) ** exponent * centre_of_mass(u.sum(axis=1), tau, exponent)


def fermi_sea(tau: complex, exponent: int, points: NDArray[np.int64]) -> Wavefunction:
    """det M times prod theta_1^(m-2) times the shifted centre of mass, straight from the definition."""
    n = len(points)
    d = (points[:, 0] + points[:, 1] * tau) / n

    def wavefunction(u: Complex) -> Complex:
        others = ~np.eye(n, dtype=bool)
        argument = u[:, :, None, None] - u[:, None, :, None] - d + d.mean()
        factors = np.where(others[:, :, None], theta_1(argument, tau), 1.0)
        matrix = np.exp(-2j * math.pi * points[:, 1] * u[:, :, None]) * np.prod(factors, axis=2)
        shifted = u.sum(axis=1) - n * d.mean() / exponent
        return np.linalg.det(matrix) * pair_product(u, tau) ** (exponent - 2) * centre_of_mass(shifted, tau, exponent)

    return wavefunction


def expansion(wavefunction: Wavefunction, tau: complex, n_electrons: int, n_flux: int) -> tuple[TorusState, float]:
    """The state in second quantisation, and the relative size of what determinants of one momentum leave over."""
    generator = np.random.default_rng(n_electrons)
    a, b = generator.random((2, 1, n_electrons)) - 0.5
    u = a + b * tau
    turn = complex((wavefunction(u + 1.0 / n_flux) / wavefunction(u))[0])
    momentum = round(np.angle(turn) * n_flux / (2.0 * math.pi))
    sector = momentum_sector(n_electrons, n_flux, momentum)
    a, b = generator.random((2, len(sector.orbitals) + 40, n_electrons)) - 0.5
    u = a + b * tau
    gaussian = np.exp(-math.pi * n_flux * tau.imag * b**2)
    n = np.arange(-6, 7)[:, None] + np.arange(n_flux) / n_flux
    exponents = 1j * math.pi * tau * n_flux * n**2 + 2j * math.pi * n_flux * n * u[..., None, None]
    orbitals = np.exp(exponents).sum(axis=-2) * gaussian[..., None]
    determinants = np.stack([np.linalg.det(orbitals[:, :, k]) for k in sector.orbitals], axis=1)
    values = wavefunction(u) * np.prod(gaussian, axis=1)
    vector = np.linalg.lstsq(determinants, values, rcond=None)[0]
    left_over = float(np.linalg.norm(determinants @ vector - values) / np.linalg.norm(values))
    lattice = cell(tau, n_flux)
    # Translations by L2/N_phi and -L1/N_phi act as X and Z^-1 here; conjugation, which leaves Sbar(q) as it is, makes
    # them the X and Z of the diagonalisation.
    return TorusState(lattice, sector, vector.conj() / np.linalg.norm(vector), math.nan), left_over
