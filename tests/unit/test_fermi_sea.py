"""The composite-fermion sea: its weight against theta functions at 30 digits, its symmetries, its moves, its points."""

from __future__ import annotations

import math
import os
import subprocess
import sys

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.sampling.walkers import start_walkers
from mcgeo.states.fermi_sea import FermiSea, closed_sea

Array = NDArray[np.float64]
HEXAGONAL = complex(0.5, math.sqrt(3.0) / 2.0)
LOPSIDED = ((3, 0), (3, 1), (4, -1), (3, 2), (5, 2))


def sea(exponent: int, n: int, tau: complex, points: tuple[tuple[int, int], ...] | None = None) -> FermiSea:
    return FermiSea(exponent, n, TorusFrame.of(Cell.from_tau(tau, exponent * n)), points)


def fractions(n: int, seed: int = 1) -> tuple[Array, Array]:
    a, b = np.random.default_rng(seed).random((2, n, 8)) - 0.5
    return a, b


def direct_log_weight(state: FermiSea, points: NDArray[np.int64], a: Array, b: Array) -> mpmath.mpf:
    """log W of one configuration from its definition, with theta functions of mpmath."""
    n, exponent = state.n_electrons, state.exponent
    tau = mpmath.mpmathify(state.frame.isotropic.tau)
    nome = mpmath.exp(1j * mpmath.pi * tau)
    u = [mpmath.mpf(x) + mpmath.mpf(y) * tau for x, y in zip(a, b, strict=True)]
    d = [(int(p) + int(s) * tau) / n for p, s in points]
    matrix = mpmath.matrix(n, n)
    for i in range(n):
        for j in range(n):
            matrix[i, j] = mpmath.exp(-2j * mpmath.pi * int(points[j][1]) * u[i])
            for k in range(n):
                if k != i:
                    matrix[i, j] *= mpmath.jtheta(1, mpmath.pi * (u[i] - u[k] - d[j] + sum(d) / n), nome)
    total = 2 * mpmath.log(abs(mpmath.det(matrix)))
    for i in range(n):
        for k in range(i):
            if exponent > 2:
                total += 2 * (exponent - 2) * mpmath.log(abs(mpmath.jtheta(1, mpmath.pi * (u[i] - u[k]), nome)))
            total -= 2 * mpmath.pi * exponent * tau.imag * (mpmath.mpf(b[i]) - mpmath.mpf(b[k])) ** 2
    mean_s = mpmath.mpf(int(points[:, 1].sum())) / n
    return total - 4 * mpmath.pi * tau.imag * mean_s * sum(mpmath.mpf(y) for y in b)


@pytest.mark.parametrize("exponent", [2, 4])
@pytest.mark.parametrize(
    ("tau", "n", "points"),
    [
        (HEXAGONAL, 7, None),
        (1j, 5, None),
        (-0.5 + 2.5j, 3, None),
        (0.1 + 6j, 3, None),
        (0.3 + 1.2j, 4, ((0, 0), (1, 0), (0, 1), (2, 1))),
        (1j, 5, LOPSIDED),
    ],
)
def test_weight_is_that_of_the_theta_functions(
    exponent: int, tau: complex, n: int, points: tuple[tuple[int, int], ...] | None
) -> None:
    state = sea(exponent, n, tau, points)
    occupied = closed_sea(state.frame.isotropic.tau, n) if points is None else np.array(points)
    a, b = fractions(n)
    weight = state.log_weight(a, b)
    with mpmath.workdps(30):
        exact = [direct_log_weight(state, occupied, a[:, w], b[:, w]) for w in range(3)]
        changes = [float(exact[w] - exact[0]) for w in range(3)]
    np.testing.assert_allclose(weight[:3] - weight[0], changes, rtol=0.0, atol=1e-11)


@pytest.mark.parametrize("exponent", [2, 4])
@pytest.mark.parametrize("points", [None, LOPSIDED])
def test_weight_is_periodic_translation_invariant_and_symmetric(
    exponent: int, points: tuple[tuple[int, int], ...] | None
) -> None:
    state = sea(exponent, 5, 0.2 + 1.1j if points else 1j, points)
    a, b = fractions(5)
    weight = state.log_weight(a, b)

    def changed(shift_a: Array, shift_b: Array) -> Array:
        return np.asarray(np.abs(state.log_weight(a + shift_a, b + shift_b) - weight))

    one = np.eye(5)[:, 2, None]
    assert np.max(changed(one, 0.0 * one)) < 1e-10
    assert np.max(changed(0.0 * one, one)) < 1e-10
    assert np.max(changed(0.0 * one, -one)) < 1e-10
    assert np.max(changed(np.full((5, 8), 0.137), np.full((5, 8), -0.21))) < 1e-10
    order = [3, 1, 0, 4, 2]
    np.testing.assert_allclose(state.log_weight(a[order], b[order]), weight, rtol=0.0, atol=1e-10)
    a[1], b[1] = a[0] + 1e-6, b[0]
    close = state.log_weight(a, b)
    a[1] = a[0] + 2e-6
    # |z|^2 at m = 2; four more powers of |z| come from the Jastrow factor at m = 4.
    np.testing.assert_allclose(state.log_weight(a, b) - close, 2 * (exponent - 1) * math.log(2.0), atol=1e-4)


def test_moving_the_whole_sea_changes_nothing_but_the_centre_of_mass() -> None:
    a, b = fractions(5)
    moved = tuple((p - 4, s + 3) for p, s in LOPSIDED)
    difference = sea(2, 5, 1j, LOPSIDED).log_weight(a, b) - sea(2, 5, 1j, moved).log_weight(a, b)
    np.testing.assert_allclose(difference, difference[0], rtol=0.0, atol=1e-10)


def uniform_numbers(words: NDArray[np.uint64]) -> Array:
    """xoshiro256++ (Blackman and Vigna, ACM Trans. Math. Softw. 47, 36 (2021)), one generator per lane, in place."""

    def turned(x: NDArray[np.uint64], places: int) -> NDArray[np.uint64]:
        return (x << np.uint64(places)) | (x >> np.uint64(64 - places))

    s0, s1, s2, s3 = words
    result = turned(s0 + s3, 23) + s0
    shifted = s1 << np.uint64(17)
    s2 ^= s0
    s3 ^= s1
    s1 ^= s2
    s0 ^= s3
    s2 ^= shifted
    s3[:] = turned(s3, 45)
    return (result >> np.uint64(11)).astype(float) / 2.0**53


def replayed(state: FermiSea, a: Array, b: Array, words: NDArray[np.uint64], step: float, n_sweeps: int) -> float:
    """The same chain by plain Metropolis on the recomputed weight, in place; returns the number accepted."""
    cell = state.frame.isotropic
    accepted = 0
    weight = state.log_weight(a, b)
    for _ in range(n_sweeps):
        for i in range(state.n_electrons):
            draws = [uniform_numbers(words) for _ in range(3 * state.proposals_per_sweep)]
            for hit in range(state.proposals_per_sweep):
                ux, uy, u = draws[3 * hit : 3 * hit + 3]
                new_a, new_b = a.copy(), b.copy()
                shift_b = (uy - 0.5) * step / (cell.side * cell.tau.imag)
                new_b[i] += shift_b
                new_a[i] += (ux - 0.5) * step / cell.side - shift_b * cell.tau.real
                new_a[i] -= np.rint(new_a[i])
                new_b[i] -= np.rint(new_b[i])
                proposed = state.log_weight(new_a, new_b)
                accept = u < np.exp(np.minimum(proposed - weight, 0.0))
                a[i, accept], b[i, accept] = new_a[i, accept], new_b[i, accept]
                weight[accept] = proposed[accept]
                accepted += int(accept.sum())
    return accepted


@pytest.mark.parametrize(
    ("exponent", "n", "tau", "points"),
    [(2, 13, HEXAGONAL, None), (4, 7, HEXAGONAL, None), (2, 5, 0.2 + 1.1j, LOPSIDED), (4, 5, 0.2 + 1.1j, LOPSIDED)],
)
def test_moves_are_those_of_a_plain_chain_on_the_recomputed_weight(
    exponent: int, n: int, tau: complex, points: tuple[tuple[int, int], ...] | None
) -> None:
    state = sea(exponent, n, tau, points)
    start = start_walkers(state, 8, seed=3)
    a, b, words = start.a[0].copy(), start.b[0].copy(), start.words[0].copy()
    group = state.group(start.a[0].copy(), start.b[0].copy(), start.words[0].copy())
    group.advance(5.0, 3)
    accepted = replayed(state, a, b, words, 5.0, 3)
    np.testing.assert_allclose(group.a, a, rtol=0.0, atol=1e-12)
    np.testing.assert_allclose(group.b, b, rtol=0.0, atol=1e-12)
    np.testing.assert_array_equal(group.words, words)
    assert group.accepted.sum() == accepted
    assert 0.2 < accepted / (3 * 8 * n * state.proposals_per_sweep) < 0.8


def test_matrices_kept_by_products_do_not_drift() -> None:
    state = sea(2, 37, HEXAGONAL)
    start = start_walkers(state, 8, seed=5)
    group = state.group(start.a[0], start.b[0], start.words[0])
    group.advance(5.5, 60)
    drift = group.drift()
    assert 0.0 < drift < 1e-9
    assert group.drift() == 0.0


def test_resuming_at_a_refresh_repeats_the_chain_to_the_last_bit() -> None:
    state = sea(2, 7, HEXAGONAL)
    start = start_walkers(state, 8, seed=6)
    group = state.group(start.a[0], start.b[0], start.words[0])
    group.advance(5.0, 100)
    group.refresh()
    again = state.group(group.a.copy(), group.b.copy(), group.words.copy())
    for chain in (group, again):
        chain.advance(5.0, 40)
        chain.advance(5.0, 40)
    np.testing.assert_array_equal(group.a, again.a)
    np.testing.assert_array_equal(group.b, again.b)


def test_largest_seas_have_finite_weights() -> None:
    for tau, n in ((HEXAGONAL, 121), (2.9j, 61)):
        state = sea(2, n, tau, tuple((k % 11 - 5, k // 11) for k in range(n)))
        assert np.all(np.isfinite(state.log_weight(*fractions(n))))


@pytest.mark.parametrize("n", [1, 7, 13, 19, 31, 37, 43, 55, 61])
def test_closed_shells_of_the_hexagonal_cell(n: int) -> None:
    points = closed_sea(TorusFrame.of(Cell.from_shape("hexagonal", 2 * n)).isotropic.tau, n)
    assert len({tuple(point) for point in points.tolist()}) == n
    assert {tuple(point) for point in points.tolist()} == {tuple(point) for point in (-points).tolist()}


@pytest.mark.parametrize("n", [1, 5, 9, 13, 21, 25, 29, 37, 45])
def test_closed_shells_of_the_square_cell(n: int) -> None:
    assert len(closed_sea(1j, n)) == n


def test_an_open_shell_is_refused_with_the_numbers_that_work() -> None:
    with pytest.raises(GeometryError, match=r"12 electrons do not close .*1, 7, 13, 19, 31, 37"):
        sea(2, 12, HEXAGONAL)
    # The stretched state sees another cell: what counts is its shape in the state's own metric.
    stretched = TorusFrame.of(Cell.from_shape("square", 26), UnimodularMetric(math.log(2.0)))
    with pytest.raises(GeometryError, match=r"state's own metric \(tau = 0 \+ 2i\), .* 11, 15"):
        FermiSea(2, 13, stretched)


def test_a_stretched_cell_is_filled_in_its_isotropic_shape() -> None:
    points = closed_sea(2j, 7)
    assert sorted(points.tolist()) == [[-2, 0], [-1, 0], [0, -1], [0, 0], [0, 1], [1, 0], [2, 0]]


@pytest.mark.parametrize(
    ("points", "words"),
    [
        (((0, 0), (1, 0), (1, 0)), "different points"),
        (((0, 0), (1, 0)), "different points"),
        (((0, 0), (0, 1), (0, 5)), "within 1.5 of their mean"),
    ],
)
def test_points_that_make_no_sea_are_refused(points: tuple[tuple[int, int], ...], words: str) -> None:
    with pytest.raises(GeometryError, match=words):
        sea(2, 3, 1j, points)


def test_other_exponents_and_long_cells_are_refused() -> None:
    with pytest.raises(GeometryError, match="2 or 4"):
        sea(3, 5, 1j)
    with pytest.raises(GeometryError, match="too elongated"):
        sea(2, 3, 60j)


_PLAIN_PYTHON = """
import numpy as np
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.sampling.walkers import start_walkers
from mcgeo.states.fermi_sea import FermiSea
state = FermiSea(4, 3, TorusFrame.of(Cell.from_shape("hexagonal", 12)), ((0, 0), (1, 0), (0, 1)))
start = start_walkers(state, 8, seed=2)
group = state.group(start.a[0], start.b[0], start.words[0])
group.advance(4.0, 1)
print(" ".join(repr(float(x)) for x in np.concatenate([group.a.ravel(), state.log_weight(group.a, group.b)])))
"""


def test_kernels_give_the_same_without_the_compiler() -> None:
    out = []
    for disabled in ("0", "1"):
        environment = {**os.environ, "NUMBA_DISABLE_JIT": disabled}
        run = subprocess.run(
            [sys.executable, "-c", _PLAIN_PYTHON], env=environment, capture_output=True, text=True, check=True
        )
        out.append([float(x) for x in run.stdout.split()])
    np.testing.assert_allclose(out[1], out[0], rtol=0.0, atol=1e-11)
