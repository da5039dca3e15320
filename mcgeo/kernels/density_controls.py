"""Control variates from smoothed densities: quantities of two and of three electrons whose mean is exactly zero.

For a smooth function Phi of the positions, L Phi = sum_i [lap_i Phi + grad_i Phi . grad_i log |Psi|^2] has mean zero
under |Psi|^2 on a torus (see `mcgeo.kernels.stein`). Phi is built from the waves |q| < q_c of the density: with

    rho_q = sum_i exp(-i q.r_i),   D_q = sum_i (q.F_i) exp(-i q.r_i),   F_i = grad_i log |Psi|^2,
    L rho_q = lambda_q = -q^2 rho_q - i D_q,

- two electrons, Phi = |rho_q|^2:  L Phi = 2 [Re(rho_q^* lambda_q) + N q^2], summed over waves with weights of |q|;
- three electrons, Phi = mean of n_a n_b n_c over the cell, n_a(r) = sum_q h_a(q) rho_q exp(i q.r):

    L Phi = mean [l_a n_b n_c + n_a l_b n_c + n_a n_b l_c] + 2 mean [n_c G_ab + n_b G_ac + n_a G_bc],

with l_a(r) = sum_q h_a lambda_q exp(i q.r), G_ab(r) = sum_i grad w_a . grad w_b (r - r_i) and
w_a(r) = sum_q h_a exp(i q.r). The last bracket is linear in |rho_q|^2. Waves end at q_c, so the mean over a grid of
more than three times as many points as waves is the mean over the cell: all of Phi is smooth and periodic.

The energy's noise that is left after functions of pairs is mostly of three electrons: the product of two forces in
L Phi of a pair. Filters h are Gaussians whose differences select bands of |q|.
"""

from __future__ import annotations

import itertools
import math
from typing import Any, NamedTuple

import numpy as np

from mcgeo.kernels._jit import lean_kernel
from mcgeo.kernels.density_fields import add_triple_means
from mcgeo.kernels.density_waves import fill_waves
from mcgeo.kernels.lanes import LANES, aligned_zeros, load, splat, store

# In units of the filling's length, 1/nu = 3: q_c and the exponents c of exp(-c q^2).
_LARGEST_WAVE = 2.5
_EXPONENTS = (0.2, 0.7, 2.0)
_N_FILTERS = len(_EXPONENTS)
# Order in which `add_triple_means` returns its sums.
_TRIPLES = tuple(itertools.combinations_with_replacement(range(_N_FILTERS), 3))


class DensityTables(NamedTuple):
    """Constants of one cell. The waves are those of the half-plane, n1 = 0 .. K1 and n2 = -K2 .. K2.

    Attributes
    ----------
    reciprocal : ndarray, shape (2, 2)
        Rows G1, G2 with q = n1 G1 + n2 G2, x along L1.
    reach : ndarray of int64, shape (K1 + 1,)
        Largest |n2| of a row.
    norm_sq : ndarray, shape (K1 + 1, 2 K2 + 1)
        q^2.
    filters : ndarray, shape (n_filters, K1 + 1, 2 K2 + 1)
        h_a, zero for waves that are not wanted.
    radial : ndarray, shape (n_pairs, K1 + 1, 2 K2 + 1)
        Weights h_a/q of L |rho_q|^2: at long waves L |rho_q|^2 is near -const (|rho_q|^2 - mean), and V(q) is 1/q.
    linear : ndarray, shape (n_triples, K1 + 1, 2 K2 + 1)
        Weights of |rho_q|^2 in the controls of three electrons.
    first, second : ndarray, shapes (2, M1/4 + 1, K1 + 1) and (2, M2/4 + 1, K2 + 1)
        Cosines and sines of 2 pi n x / M on a quarter of the grid along L1 and L2.
    """

    reciprocal: np.ndarray
    reach: np.ndarray
    norm_sq: np.ndarray
    filters: np.ndarray
    radial: np.ndarray
    linear: np.ndarray
    first: np.ndarray
    second: np.ndarray

    @property
    def n_controls(self) -> int:
        """Number of controls."""
        return len(self.radial) + len(self.linear)


class DensityScratch(NamedTuple):
    """Room for one configuration of eight walkers: see the kernels that fill it."""

    strengths: np.ndarray
    powers: np.ndarray
    rows: np.ndarray
    density: np.ndarray
    change: np.ndarray
    folded: np.ndarray
    columns: np.ndarray
    lines: np.ndarray
    triples: np.ndarray


def _grid_points(largest: int) -> int:
    """A multiple of four above three times the largest number of a wave."""
    return 4 * (3 * largest // 4 + 1)


def _quarter(largest: int) -> np.ndarray:
    n_points = _grid_points(largest)
    turns = np.outer(np.arange(n_points // 4 + 1), np.arange(largest + 1)) / n_points
    return np.stack([np.cos(2.0 * math.pi * turns), np.sin(2.0 * math.pi * turns)])


def density_tables(tau: complex, side: float, n_electrons: int) -> DensityTables:
    """Tables of the cell with modulus tau and |L1| = ``side`` (l_B)."""
    length_sq = side * side * tau.imag / (2.0 * math.pi * n_electrons) / 3.0
    q_max = _LARGEST_WAVE / math.sqrt(length_sq)
    reciprocal = 2.0 * math.pi / side * np.array([[1.0, -tau.real / tau.imag], [0.0, 1.0 / tau.imag]])
    # Two electrons and more: q_c reaches twice the shortest wave, so there are three waves that add up to nothing.
    k1, k2 = (max(1, int(q_max * side * length / (2.0 * math.pi))) for length in (1.0, abs(tau)))
    n1, n2 = np.meshgrid(np.arange(-k1, k1 + 1), np.arange(-k2, k2 + 1), indexing="ij")
    q = np.stack([n1, n2], axis=-1) @ reciprocal
    norm_sq = np.sum(q * q, axis=-1)
    wanted = (norm_sq < q_max * q_max) & (norm_sq > 0.0)
    filters = np.array([wanted * np.exp(-c * length_sq * norm_sq) for c in _EXPONENTS])
    linear = _linear_weights(filters, q)
    inverse = 1.0 / np.sqrt(np.where(wanted, norm_sq, 1.0))
    radial = filters * inverse
    half = wanted & ((n1 > 0) | ((n1 == 0) & (n2 > 0)))

    def rows(values: np.ndarray) -> np.ndarray:
        return np.ascontiguousarray((values * half)[..., k1:, :])

    reach = np.array([np.abs(n2[k1 + row][half[k1 + row]]).max(initial=0) for row in range(k1 + 1)])
    return DensityTables(
        reciprocal, reach, rows(norm_sq), rows(filters), rows(radial), rows(2.0 * linear), _quarter(k1), _quarter(k2)
    )


def _linear_weights(filters: np.ndarray, q: np.ndarray) -> np.ndarray:
    """2 [h_c G_ab + h_b G_ac + h_a G_bc] of every triple, G_ab(q) the Fourier coefficients of grad w_a . grad w_b."""
    shape = filters.shape[1:]
    grid = tuple(2 * n for n in shape)
    place = np.ix_(*(np.arange(-(n // 2), n // 2 + 1) for n in shape))
    embedded = np.zeros((len(filters), 2, *grid), dtype=complex)
    for axis in range(2):
        for a, h in enumerate(filters):
            embedded[a, axis][place] = 1j * q[..., axis] * h
    gradients = np.fft.ifft2(embedded).real * (grid[0] * grid[1])
    product = np.fft.fft2(np.einsum("adxy,bdxy->abxy", gradients, gradients)).real / (grid[0] * grid[1])
    between = product[(slice(None), slice(None), *place)]
    return np.array(
        [
            2.0 * (filters[c] * between[a, b] + filters[b] * between[a, c] + filters[a] * between[b, c])
            for a, b, c in _TRIPLES
        ]
    )


def density_scratch(tables: DensityTables, n_electrons: int) -> DensityScratch:
    """Room for one configuration of eight walkers."""
    n_rows, width = tables.norm_sq.shape
    points_1, points_2 = (4 * (table.shape[1] - 1) for table in (tables.first, tables.second))
    n_reach = width // 2 + 1
    return DensityScratch(
        aligned_zeros((2 * n_electrons, LANES)),
        aligned_zeros((2 * (n_reach + 1) * n_electrons, LANES)),
        aligned_zeros((8 * n_electrons, LANES)),
        aligned_zeros((2 * n_rows * width, LANES)),
        aligned_zeros((2 * n_rows * width, LANES)),
        aligned_zeros((8 * n_reach, LANES)),
        aligned_zeros((4 * _N_FILTERS * n_rows * points_2, LANES)),
        aligned_zeros((2 * _N_FILTERS * points_1, LANES)),
        aligned_zeros((len(_TRIPLES), LANES)),
    )


@lean_kernel
def _add_weighted_waves(tables: Any, scratch: Any, n_electrons: int, total: np.ndarray) -> None:
    """Controls of two electrons, and the part of those of three that is linear in |rho_q|^2."""
    n_rows, width = tables.norm_sq.shape
    n_pairs, n_triples = tables.radial.shape[0], tables.linear.shape[0]
    for n1 in range(n_rows):
        for n2 in range(width // 2 - tables.reach[n1], width // 2 + tables.reach[n1] + 1):
            place = 2 * (n1 * width + n2)
            real, imag = load(scratch.density, place), load(scratch.density, place + 1)
            square = real * real + imag * imag
            pair = real * load(scratch.change, place) + imag * load(scratch.change, place + 1)
            pair = pair * 2.0 + splat(2.0 * n_electrons * tables.norm_sq[n1, n2])
            for p in range(n_pairs):
                store(total, p, load(total, p) + pair * (tables.radial[p, n1, n2] / n_electrons))
            for t in range(n_triples):
                row = n_pairs + t
                store(total, row, load(total, row) + square * (tables.linear[t, n1, n2] / n_electrons))


@lean_kernel
def add_density_controls(
    tables: Any, a: np.ndarray, b: np.ndarray, forces: np.ndarray, scratch: Any, total: np.ndarray
) -> None:
    """Add the control values of the present configurations, per electron.

    Parameters
    ----------
    tables : DensityTables
    a, b : ndarray, shape (n_electrons, 8)
        Positions in units of the cell's vectors.
    forces : ndarray, shape (2 n_electrons, 8)
        Rows 2i and 2i + 1: derivatives of log |Psi|^2 by x_i and y_i (x along L1), in 1/l_B.
    scratch : DensityScratch
    total : ndarray, shape (n_controls, 8)
        Updated: first the controls of two electrons, then those of three.
    """
    n_electrons = a.shape[0]
    fill_waves(tables, a, b, forces, scratch)
    _add_weighted_waves(tables, scratch, n_electrons, total)
    add_triple_means(tables, scratch)
    for t in range(tables.linear.shape[0]):
        row = tables.radial.shape[0] + t
        store(total, row, load(total, row) + load(scratch.triples, t) * (1.0 / n_electrons))
