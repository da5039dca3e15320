"""Controls from smoothed densities against derivatives of their functions, which are written out as sums over waves."""

import itertools
import math

import numpy as np
import pytest

from mcgeo.kernels.density_controls import add_density_controls, density_scratch, density_tables
from mcgeo.kernels.lanes import LANES

N = 5
SHIFT = 1e-4


def functions(tables, a, b):
    """Phi per electron of every control, from positions of shape (N,): waves of the half-plane, a fine grid."""
    n_rows, width = tables.norm_sq.shape
    n1, n2 = np.arange(n_rows)[:, None], np.arange(width)[None, :] - width // 2
    waves = np.exp(-2j * math.pi * (n1[..., None] * a + n2[..., None] * b)).sum(axis=-1)
    points = np.arange(4 * max(n_rows, width)) / (4 * max(n_rows, width))
    first, second = np.exp(2j * math.pi * np.outer(points, n1)), np.exp(2j * math.pi * np.outer(n2, points))
    pairs = [np.sum(weights * np.abs(waves) ** 2) for weights in tables.radial]
    fields = [2.0 * (first @ (h * waves) @ second).real for h in tables.filters]
    chosen = itertools.combinations_with_replacement(fields, 3)
    return np.array(pairs + [np.mean(x * y * z) for x, y, z in chosen]) / N


def generator(tables, tau, side, a, b, forces):
    """sum_i [lap_i Phi + F_i . grad_i Phi] by central differences."""
    to_fractions = np.linalg.inv([[side, side * tau.real], [0.0, side * tau.imag]])
    step = SHIFT * side
    here, total = functions(tables, a, b), 0.0
    for i, axis in itertools.product(range(N), range(2)):
        moved = []
        for sign in (1.0, -1.0):
            shifted = np.array([a, b])
            shifted[:, i] += sign * step * to_fractions[:, axis]
            moved.append(functions(tables, *shifted))
        total = total + (moved[0] + moved[1] - 2.0 * here) / step**2
        total = total + forces[2 * i + axis] * (moved[0] - moved[1]) / (2.0 * step)
    return total


def agrees(tau, forces_scale=1.0):
    side = math.sqrt(2.0 * math.pi * 3 * N / tau.imag)
    tables = density_tables(tau, side, N)
    random = np.random.default_rng(1)
    a, b = random.uniform(-0.5, 0.5, (2, N, LANES))
    forces = random.normal(size=(2 * N, LANES))
    found = np.zeros((tables.n_controls, LANES))
    for _ in range(2):
        add_density_controls(tables, a, b, forces, density_scratch(tables, N), found)
    for lane in (0, 5):
        expected = 2.0 * generator(tables, tau, side, a[:, lane], b[:, lane], forces_scale * forces[:, lane])
        np.testing.assert_allclose(found[:, lane], expected, atol=1e-5 * np.abs(expected).max())


@pytest.mark.parametrize("tau", [1j, complex(0.5, math.sqrt(0.75)), complex(-0.3, 1.4), complex(0.2, 4.0)])
def test_controls_are_the_generator_of_their_functions(tau):
    agrees(tau)


def test_the_check_sees_other_forces():
    with pytest.raises(AssertionError):
        agrees(1j, forces_scale=0.99)

