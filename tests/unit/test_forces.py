"""Gradients of log |Psi|^2 against theta functions of mpmath and numerical differentiation of the weights."""

import math

import mpmath
import numpy as np
import pytest

from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.kernels.lanes import LANES
from mcgeo.states.fermi_sea import FermiSea
from mcgeo.states.laughlin import Laughlin
from mcgeo.states.laughlin_droplet import LaughlinDroplet
from mcgeo.states.moore_read import MooreRead
from mcgeo.states.moore_read_droplet import MooreReadDroplet

MODULI = [1j, complex(0.5, math.sqrt(0.75)), complex(-0.4, 1.3), complex(0.2, 6.0), complex(-0.3, 20.0)]


def frame(n_flux, tau):
    return TorusFrame.of(Cell.from_tau(tau, n_flux))


def walkers(state, seed, spread=0.5):
    """A group at random positions in the cell."""
    random = np.random.default_rng(seed)
    a, b = random.uniform(-spread, spread, (2, state.n_electrons, LANES))
    return state.group(a, b, random.integers(0, 2**64, (4, LANES), dtype=np.uint64))


def numerical_forces(state, group, step=1e-3):
    """Derivatives of `log_weight` by x_i and y_i, central differences of sixth order."""
    cell = state.frame.isotropic
    rows = []
    for i in range(state.n_electrons):
        for along_a, along_b in ((1.0, 0.0), (-cell.tau.real / cell.tau.imag, 1.0 / cell.tau.imag)):
            total = np.zeros(LANES)
            for k, weight in ((1, 45.0), (2, -9.0), (3, 1.0)):
                for sign in (1.0, -1.0):
                    a, b = group.a.copy(), group.b.copy()
                    a[i] += sign * k * step * along_a / cell.side
                    b[i] += sign * k * step * along_b / cell.side
                    total += sign * weight * state.log_weight(a, b)
            rows.append(total / (60.0 * step))
    return np.array(rows)


def closest(state, group):
    """Least distance of two electrons of each walker."""
    cell = state.frame.isotropic
    difference = np.stack([group.a[:, None] - group.a, group.b[:, None] - group.b], axis=-1) @ cell.vectors
    distance = np.hypot(*np.moveaxis(cell.minimum_image(difference), -1, 0))
    distance[np.arange(state.n_electrons), np.arange(state.n_electrons)] = np.inf
    return distance.min(axis=(0, 1))


def require_gradient(state, group):
    """Walkers without close pairs, where differences of this order are exact to 1e-7."""
    group.advance(state.first_step, 20)
    found, expected = group.forces(), numerical_forces(state, group)
    apart = closest(state, group) > 0.3
    assert apart.sum() >= 4
    np.testing.assert_allclose(found[:, apart], expected[:, apart], rtol=1e-6, atol=1e-6)


@pytest.mark.parametrize("tau", MODULI)
@pytest.mark.parametrize(("exponent", "n_electrons"), [(1, 4), (2, 3), (3, 6), (5, 2)])
def test_laughlin_against_the_weight(exponent, n_electrons, tau):
    state = Laughlin(exponent, n_electrons, frame(exponent * n_electrons, tau))
    require_gradient(state, walkers(state, 1))


@pytest.mark.parametrize("tau", MODULI)
@pytest.mark.parametrize("sector", [1, 2, 3])
@pytest.mark.parametrize(("exponent", "n_electrons"), [(1, 4), (2, 2), (2, 8)])
def test_moore_read_against_the_weight(exponent, n_electrons, sector, tau):
    state = MooreRead(exponent, n_electrons, frame(exponent * n_electrons, tau), sector)
    require_gradient(state, walkers(state, 2))


SEAS = [
    (2, 7, complex(0.5, math.sqrt(0.75)), None),
    (4, 7, complex(0.5, math.sqrt(0.75)), None),
    (2, 9, 1j, None),
    (2, 4, complex(0.2, 1.1), [[0, 0], [1, 0], [0, 1], [1, 1]]),
    (4, 5, complex(-0.3, 2.5), [[0, 0], [1, 0], [0, 1], [1, 1], [3, 2]]),
]


@pytest.mark.parametrize(("exponent", "n_electrons", "tau", "points"), SEAS)
def test_sea_against_the_weight(exponent, n_electrons, tau, points):
    state = FermiSea(exponent, n_electrons, frame(exponent * n_electrons, tau), points)
    require_gradient(state, walkers(state, 8))


def test_the_comparison_sees_a_wrong_state():
    state, other = Laughlin(3, 6, frame(18, 1j)), Laughlin(2, 6, frame(18, 1j))
    group = walkers(state, 1)
    group.advance(4.0, 20)
    same = other.group(group.a.copy(), group.b.copy(), group.words.copy())
    assert np.abs(same.forces() - numerical_forces(state, group)).max() > 0.1


def laughlin_forces_mpmath(exponent, a, b, tau, side):
    """Forces from theta_1'/theta_1 by mpmath, positions of shape (n_electrons,); shape (2 n_electrons,)."""
    modulus = mpmath.mpc(tau.real, tau.imag)
    nome = mpmath.exp(1j * mpmath.pi * modulus)
    rows = []
    for i in range(len(a)):
        total, separation = mpmath.mpc(0), mpmath.mpf(0)
        for j in range(len(a)):
            if j != i:
                v = mpmath.pi * (mpmath.mpf(a[i]) - mpmath.mpf(a[j]) + (mpmath.mpf(b[i]) - mpmath.mpf(b[j])) * modulus)
                total += mpmath.jtheta(1, v, nome, 1) / mpmath.jtheta(1, v, nome) * mpmath.pi / side
                separation += mpmath.mpf(b[i]) - mpmath.mpf(b[j])
        rows += [2 * exponent * total.real, -2 * exponent * total.imag - 4 * mpmath.pi * exponent * separation / side]
    return np.array([float(row) for row in rows])


@pytest.mark.parametrize("tau", MODULI)
def test_laughlin_against_theta_functions(tau):
    # Random positions: pairs at every separation of the cell, images included.
    state = Laughlin(3, 6, frame(18, tau))
    group = walkers(state, 3)
    found = group.forces()
    with mpmath.workdps(40):
        for lane in range(3):
            expected = laughlin_forces_mpmath(3, group.a[:, lane], group.b[:, lane], tau, state.frame.isotropic.side)
            np.testing.assert_allclose(found[:, lane], expected, rtol=0.0, atol=1e-12 * np.abs(expected).max())


def moore_read_forces_mpmath(exponent, sector, a, b, tau, side):
    """Forces by differentiation of log Pf + m sum log theta_1 of four electrons at the precision of mpmath."""
    modulus = mpmath.mpc(tau.real, tau.imag)
    nome = mpmath.exp(1j * mpmath.pi * modulus)
    z = [mpmath.mpf(x) + mpmath.mpf(y) * modulus for x, y in zip(a, b, strict=True)]

    def log_psi(z):
        def theta(index, i, j):
            return mpmath.jtheta(index, mpmath.pi * (z[i] - z[j]), nome)

        def entry(i, j):
            return theta(sector + 1, i, j) / theta(1, i, j)

        pfaffian = entry(0, 1) * entry(2, 3) - entry(0, 2) * entry(1, 3) + entry(0, 3) * entry(1, 2)
        return mpmath.log(pfaffian) + exponent * mpmath.fsum(
            mpmath.log(theta(1, i, j)) for i in range(4) for j in range(i)
        )

    rows, step = [], mpmath.mpf(10) ** -12
    for i in range(4):
        ahead, behind = list(z), list(z)
        ahead[i] += step
        behind[i] -= step
        slope = (log_psi(ahead) - log_psi(behind)) / (2 * step * side)
        separation = mpmath.fsum(mpmath.mpf(b[i]) - mpmath.mpf(y) for y in b)
        rows += [2 * slope.real, -2 * slope.imag - 4 * mpmath.pi * exponent * separation / side]
    return np.array([float(row) for row in rows])


@pytest.mark.parametrize("tau", MODULI)
@pytest.mark.parametrize("sector", [1, 2, 3])
def test_moore_read_against_theta_functions(sector, tau):
    state = MooreRead(2, 4, frame(8, tau), sector)
    group = walkers(state, 4)
    found = group.forces()
    with mpmath.workdps(50):
        for lane in range(2):
            expected = moore_read_forces_mpmath(
                2, sector, group.a[:, lane], group.b[:, lane], tau, state.frame.isotropic.side
            )
            np.testing.assert_allclose(found[:, lane], expected, rtol=0.0, atol=1e-11 * np.abs(expected).max())


@pytest.mark.parametrize("tau", MODULI)
def test_forces_sum_to_zero(tau):
    # The weight does not change under a common shift of all electrons.
    for state in (Laughlin(3, 30, frame(90, tau)), *(MooreRead(2, 30, frame(60, tau), s) for s in (1, 2, 3))):
        group = walkers(state, 5)
        group.advance(state.first_step, 10)
        forces = group.forces().reshape(30, 2, LANES)
        assert np.abs(forces.sum(axis=0)).max() < 1e-9 * np.abs(forces).max()
        assert np.abs(forces[:15].sum(axis=0)).max() > 1e-3 * np.abs(forces).max()


def test_forces_after_moves_are_those_of_fresh_walkers():
    hexagonal = complex(0.5, math.sqrt(0.75))
    for state in (
        Laughlin(3, 20, frame(60, 1j)),
        MooreRead(2, 20, frame(40, 1j), 1),
        FermiSea(2, 13, frame(26, hexagonal)),
    ):
        group = walkers(state, 6)
        group.advance(state.first_step, 200)
        kept = group.forces()
        group.refresh()
        np.testing.assert_allclose(kept, group.forces(), rtol=1e-8, atol=1e-8)


def test_droplets_have_none():
    random = np.random.default_rng(7)
    for droplet in (LaughlinDroplet(3, 4), MooreReadDroplet(2, 4)):
        positions = np.array([droplet.start(random) for _ in range(LANES)]).transpose(1, 2, 0).copy()
        group = droplet.group(*positions, random.integers(0, 2**64, (4, LANES), dtype=np.uint64))
        assert group.forces() is None
