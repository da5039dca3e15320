"""The centre-of-mass factor of the Laughlin state decouples: shown by summing over all positions of two and three.

The full |Psi|^2, with the factor of Haldane and Rezayi (Phys. Rev. B 31, 2529 (1985)) for every one of the m sectors,
is summed over a grid of positions of all electrons. Periodic functions with a limited band are summed exactly so.
"""

import math

import numpy as np
import pytest

from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.kernels.lanes import LANES
from mcgeo.states.laughlin import Laughlin
from tests.exact.torus_diagonalisation import zero_mode
from tests.exact.torus_shapes import ISOTROPIC, cell, waves
from tests.exact.torus_theta import centre_of_mass_weight

WAVES = [(0, 1), (1, 0), (1, 1), (1, -1), (2, 0), (0, 2), (2, 1)]


def relative_grid(n_electrons, n_grid):
    """Integer grid positions of all electrons with the first one at the origin, shape (n_electrons, 2, n_points)."""
    axes = np.meshgrid(*[np.arange(n_grid)] * (2 * (n_electrons - 1)), indexing="ij")
    others = np.stack([axis.ravel() for axis in axes]).reshape(n_electrons - 1, 2, -1)
    return np.concatenate([np.zeros((1, 2, others.shape[-1]), dtype=int), others])


def package_weights(exponent, grid, n_grid, tau):
    """|Psi|^2 without the centre of mass from the package, shape (n_points,)."""
    n_electrons, _, n_points = grid.shape
    state = Laughlin(exponent, n_electrons, TorusFrame.of(Cell.from_tau(tau, exponent * n_electrons)))
    folded = ((grid + n_grid // 2) % n_grid - n_grid // 2) / n_grid
    padded = np.concatenate([folded, np.zeros((n_electrons, 2, -n_points % LANES))], axis=-1)
    chunks = padded.reshape(n_electrons, 2, -1, LANES)
    logs = np.concatenate([
        state.log_weight(np.ascontiguousarray(chunks[:, 0, k]), np.ascontiguousarray(chunks[:, 1, k]))
        for k in range(chunks.shape[2])
    ])[:n_points]  # fmt: skip
    # Electrons on one grid point have weight zero; the kernel gives them a very small one.
    return np.exp(logs - logs.max())


def structure(grid, n_grid, weights):
    """<|rho_q|^2>/N of the integer waves."""
    result = []
    for n1, n2 in WAVES:
        density = np.exp(2j * math.pi * (n1 * grid[:, 0] + n2 * grid[:, 1]) / n_grid).sum(axis=0)
        result.append(np.sum(weights * np.abs(density) ** 2) / weights.sum() / len(grid))
    return np.array(result)


def mean_factor(exponent, sector, grid, n_grid, tau):
    """Average of the centre-of-mass factor over common shifts of all electrons, for each relative position."""
    n_electrons = len(grid)
    cells = np.arange(n_grid) / n_grid
    table = centre_of_mass_weight(exponent, n_electrons, sector, cells[:, None], cells[None, :], tau)
    total = grid.sum(axis=0)
    mean = np.zeros(grid.shape[-1])
    for s in range(n_grid):
        for t in range(n_grid):
            mean += table[(total[0] + n_electrons * s) % n_grid, (total[1] + n_electrons * t) % n_grid]
    return mean / n_grid**2


def factor_of_the_separation(exponent, sector, grid, n_grid, tau):
    """A wrong one: the factor at the separation of the first two, which no common shift changes."""
    a, b = (grid[1] - grid[0]) / n_grid
    return centre_of_mass_weight(exponent, len(grid), sector, a, b, tau)


def decouples(exponent, n_electrons, tau, n_grid, factor=mean_factor):
    """Structure factors with the factor of each sector are those without it, which are returned."""
    grid = relative_grid(n_electrons, n_grid)
    weights = package_weights(exponent, grid, n_grid, tau)
    without = structure(grid, n_grid, weights)
    for sector in range(exponent):
        weights_with = weights * factor(exponent, sector, grid, n_grid, tau)
        np.testing.assert_allclose(structure(grid, n_grid, weights_with), without, rtol=1e-9)
    return without


@pytest.mark.parametrize("tau", [1j, complex(0.5, math.sqrt(0.75)), complex(-0.3, 1.3)])
@pytest.mark.parametrize("exponent", [1, 2, 3])
def test_two_electrons(exponent, tau):
    decouples(exponent, 2, tau, 33)


@pytest.mark.parametrize("exponent", [2, 3])
def test_three_electrons(exponent):
    tau = complex(0.2, 1.1)
    found = decouples(exponent, 3, tau, 16)
    # The same numbers from second quantisation, where no sector was left out: S - 1 = exp(-q^2/2) (Sbar - 1).
    lattice = cell(tau, 3 * exponent)
    exact = zero_mode(lattice, 3 * exponent, 3, ISOTROPIC, bosons=exponent == 2)[0]
    vectors = waves(lattice, WAVES)
    damping = np.exp(-0.5 * np.sum(vectors**2, axis=1))
    np.testing.assert_allclose(found, 1.0 + damping * (exact.structure_factor(vectors) - 1.0), rtol=1e-7)


def test_another_factor_does_not_decouple():
    with pytest.raises(AssertionError):
        decouples(3, 2, 1j, 33, factor_of_the_separation)


@pytest.mark.parametrize("tau", [1j, complex(0.5, 0.9)])
def test_the_factor_is_periodic(tau):
    a, b = np.random.default_rng(1).uniform(-0.5, 0.5, (2, 10))
    for sector in range(3):
        weight = centre_of_mass_weight(3, 4, sector, a, b, tau)
        for shift_a, shift_b in [(1, 0), (0, 1), (-2, 1)]:
            shifted = centre_of_mass_weight(3, 4, sector, a + shift_a, b + shift_b, tau)
            np.testing.assert_allclose(shifted, weight, rtol=1e-9)
