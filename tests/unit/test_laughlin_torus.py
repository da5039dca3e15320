"""Weights of the Laughlin state on the torus against theta functions of mpmath at 40 digits."""

import cmath
import math

import mpmath
import numpy as np
import pytest

from mcgeo.errors import GeometryError
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.kernels.lanes import LANES
from mcgeo.states.laughlin import Laughlin
from tests.exact.torus_theta import log_pair_factor, log_pair_factor_mpmath, log_weight, log_weight_mpmath

MODULI = [
    1j,
    complex(0.5, math.sqrt(0.75)),
    complex(-0.5, math.sqrt(0.75)),
    complex(-0.5, 1.4),
    cmath.exp(1.3j),
    cmath.exp(1.95j),
    complex(0.2, 5.0),
    complex(-0.37, 20.0),
    20j,
]


def laughlin(exponent, n_electrons, tau):
    return Laughlin(exponent, n_electrons, TorusFrame.of(Cell.from_tau(tau, exponent * n_electrons)))


def positions(n_electrons, seed):
    return np.random.default_rng(seed).uniform(-0.5, 0.5, (2, n_electrons, LANES))


def tolerance(log_weights):
    """1e-11 and four roundings of the logarithm itself, which reaches some 1e4 in long cells."""
    return 1e-11 + 4.0 * np.finfo(float).eps * np.abs(log_weights).max()


def agrees(state, a, b, lanes, exponent=None, tau=None):
    """Differences of log weights between walkers, against 40 digits."""
    exponent, tau = exponent or state.exponent, tau or state.frame.isotropic.tau
    found = state.log_weight(a, b)
    with mpmath.workdps(40):
        exact = [log_weight_mpmath(exponent, a[:, k], b[:, k], tau) for k in lanes]
        for k, value in zip(lanes[1:], exact[1:], strict=True):
            assert abs(float(found[k] - found[lanes[0]] - (value - exact[0]))) < tolerance(found)


@pytest.mark.parametrize("tau", MODULI)
@pytest.mark.parametrize("exponent", [1, 2, 3, 4, 5])
def test_two_and_five_electrons(exponent, tau):
    agrees(laughlin(exponent, 2, tau), *positions(2, 1), range(LANES))
    agrees(laughlin(exponent, 5, tau), *positions(5, 2), range(3))


@pytest.mark.parametrize("tau", [MODULI[1], MODULI[5], MODULI[7]])
def test_thirty_electrons(tau):
    agrees(laughlin(3, 30, tau), *positions(30, 3), range(2))


def test_the_weight_check_sees_faults():
    a, b = positions(5, 2)
    with pytest.raises(AssertionError):
        agrees(laughlin(3, 5, 1j), a, b, range(3), exponent=3.0000001)
    with pytest.raises(AssertionError):
        agrees(laughlin(3, 5, 1j), a, b, range(3), tau=complex(1e-9, 1.0))


@pytest.mark.parametrize("tau", MODULI)
def test_moves_of_one_electron(tau):
    # Walker 0 stays, the others have electron 2 elsewhere: the ratios that decide about moves.
    state = laughlin(3, 4, tau)
    a, b = positions(4, 4)
    for array in (a, b):
        array[[0, 1, 3]] = array[[0, 1, 3], :1]
    agrees(state, a, b, range(LANES))


@pytest.mark.parametrize("tau", MODULI)
@pytest.mark.parametrize("exponent", [2, 3])
def test_double_periodicity(exponent, tau):
    # All b lie in (0, 1/2), so that a shift by -L2 keeps every difference within one cell.
    state = laughlin(exponent, 6, tau)
    a, b = positions(6, 5)
    b = 0.5 * np.abs(b) + 0.1
    before = state.log_weight(a, b)
    for shift_a, shift_b in [(1.0, 0.0), (-1.0, 0.0), (0.0, -1.0), (1.0, -1.0)]:
        moved_a, moved_b = a.copy(), b.copy()
        moved_a[2] += shift_a
        moved_b[2] += shift_b
        np.testing.assert_allclose(state.log_weight(moved_a, moved_b), before, rtol=0.0, atol=tolerance(before))
    moved_b[2] += 0.01
    assert np.abs(state.log_weight(moved_a, moved_b) - before).min() > 1e-4


@pytest.mark.parametrize("tau", MODULI)
def test_symmetries(tau):
    # Common shifts, exchange and inversion leave the weight alone.
    state = laughlin(3, 5, tau)
    a, b = positions(5, 6) * 0.4
    before = state.log_weight(a, b)
    for other in (
        state.log_weight(a + 0.21, b - 0.17),
        state.log_weight(a[[3, 1, 4, 0, 2]], b[[3, 1, 4, 0, 2]]),
        state.log_weight(-a, -b),
    ):
        np.testing.assert_allclose(other, before, rtol=0.0, atol=tolerance(before))


def test_weights_vanish_as_two_electrons_meet():
    # |Psi|^2 ~ r^2m.
    state = laughlin(3, 3, 1j)
    a, b = np.zeros((2, 3, LANES))
    a[1], b[1] = 10.0 ** -np.arange(1.0, 9.0), 0.0
    a[2], b[2] = -0.3, 0.4
    slope = np.diff(state.log_weight(a, b)) / -math.log(10.0)
    np.testing.assert_allclose(slope[3:], 6.0, atol=1e-3)


@pytest.mark.parametrize("tau", [MODULI[1], MODULI[3], 28j])
@pytest.mark.parametrize("exponent", [1, 3])
def test_four_hundred_electrons_neither_over_nor_underflow(exponent, tau):
    state = laughlin(exponent, 400, tau)
    a, b = positions(400, 8)
    # Some walkers are spread, some crowd at either end of the cell, some lie in one small spot.
    b[:, 2], b[:, 3] = np.where(b[:, 2] > 0, 0.5, -0.5), 0.5 - 1e-3 * np.abs(b[:, 3])
    a[:, 4:6], b[:, 4:6] = 1e-4 * a[:, 4:6], 0.49 + 1e-4 * b[:, 4:6]
    b[:, 6] *= 1e-6
    found = state.log_weight(a, b)
    expected = log_weight(exponent, a, b, tau)
    assert np.all(np.isfinite(found))
    np.testing.assert_allclose(found - found[0], expected - expected[0], rtol=1e-11, atol=1e-6)


@pytest.mark.parametrize("tau", MODULI)
def test_float_theta_series_is_the_one_of_mpmath(tau):
    a, b = np.random.default_rng(9).uniform(-1.0, 1.0, (2, 20))
    with mpmath.workdps(40):
        exact = [float(log_pair_factor_mpmath(x, y, tau)) for x, y in zip(a, b, strict=True)]
    # Near b = 0 and long cells the terms n and -n - 1 cancel no more than the sine does.
    np.testing.assert_allclose(log_pair_factor(a, b, tau), exact, atol=1e-11)


def test_too_long_a_cell_is_refused():
    laughlin(3, 4, 28j)
    with pytest.raises(GeometryError, match="at most 28 works"):
        laughlin(3, 4, 28.1j)


@pytest.mark.parametrize(("exponent", "statistics"), [(1, "fermions"), (2, "bosons"), (3, "fermions"), (4, "bosons")])
def test_what_the_state_says_of_itself(exponent, statistics):
    state = laughlin(exponent, 4, 1j)
    assert state.statistics == statistics
    assert state.filling * state.frame.lab.n_flux == 4
    assert state.shift == state.first_occupied == exponent
    assert state.label == f"Laughlin {'1' if exponent == 1 else f'1/{exponent}'}"
