"""Moves of the Laughlin state: replayed by hand with theta functions, and their stationary distribution."""

import math

import numpy as np
import pytest
from scipy import stats

from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.kernels.lanes import LANES
from mcgeo.kernels.laughlin_torus import advance, laughlin_torus_tables, refresh_phases
from mcgeo.states.laughlin import Laughlin
from tests.exact.torus_theta import log_pair_factor
from tests.exact.xoshiro import uniforms

MODULI = [1j, complex(0.5, math.sqrt(0.75)), complex(-0.5, 1.4), complex(0.2, 6.0), complex(-0.3, 20.0)]


class Walkers:
    """Arrays of eight walkers as the kernels want them."""

    def __init__(self, exponent, n_electrons, tau, seed):
        random = np.random.default_rng(seed)
        self.exponent, self.tau = exponent, tau
        self.side = Cell.from_tau(tau, exponent * n_electrons).side
        self.tables = laughlin_torus_tables(exponent, tau, self.side)
        self.a, self.b = random.uniform(-0.5, 0.5, (2, n_electrons, LANES))
        self.words = random.integers(0, 2**64, (4, LANES), dtype=np.uint64)
        self.accepted = np.zeros((1, LANES))
        self.phases = np.empty((2 * n_electrons, LANES))
        self.sums = np.empty((4 * len(self.tables.far) + 1, LANES))
        refresh_phases(self.tables, self.a, self.b, self.phases, self.sums)

    def advance(self, step, n_sweeps, n_hits=2):
        advance(
            self.tables, self.a, self.b, self.phases, self.sums, self.words, self.accepted, step, n_sweeps, n_hits
        )  # fmt: skip


def replay(walkers, step, n_sweeps, n_hits=2, exponent=None):
    """The same Metropolis moves with theta functions; returns positions and the number accepted.

    Every electron in turn, exchanged with the last one first; x and y uniform in a square, accepted with probability
    min(1, ratio of |Psi|^2).
    """
    a, b, tau = walkers.a.copy(), walkers.b.copy(), walkers.tau
    exponent = exponent or walkers.exponent
    streams = [uniforms(walkers.words[:, lane].tolist()) for lane in range(LANES)]
    n_accepted = np.zeros(LANES)
    for i in list(range(len(a))) * n_sweeps:
        for array in (a, b):
            array[[i, -1]] = array[[-1, i]]
        for _ in range(n_hits):
            ux, uy, u = np.array([[next(stream) for _ in range(3)] for stream in streams]).T
            dx, dy = step * (ux - 0.5), step * (uy - 0.5)
            new_b = b[-1] + dy / (walkers.side * tau.imag)
            new_a = a[-1] + dx / walkers.side - (new_b - b[-1]) * tau.real
            new_a, new_b = new_a - np.rint(new_a), new_b - np.rint(new_b)
            old = log_pair_factor(a[-1] - a[:-1], b[-1] - b[:-1], tau).sum(axis=0)
            new = log_pair_factor(new_a - a[:-1], new_b - b[:-1], tau).sum(axis=0)
            accept = u < np.exp(np.minimum(exponent * (new - old), 0.0))
            a[-1], b[-1] = np.where(accept, new_a, a[-1]), np.where(accept, new_b, b[-1])
            n_accepted += accept
    return a, b, n_accepted


def same_moves(walkers, step, n_sweeps, n_hits=2, replayed_exponent=None, replayed_step=None):
    """Advance and replay; every position and every count must agree."""
    a, b, n_accepted = replay(walkers, replayed_step or step, n_sweeps, n_hits, replayed_exponent)
    before = walkers.accepted[0].copy()
    walkers.advance(step, n_sweeps, n_hits)
    np.testing.assert_array_equal(walkers.accepted[0] - before, n_accepted)
    for found, expected in ((walkers.a, a), (walkers.b, b)):
        assert np.abs(found).max() <= 0.5
        difference = found - expected
        assert np.abs(difference - np.rint(difference)).max() < 1e-11
    return n_accepted


@pytest.mark.parametrize("tau", MODULI)
@pytest.mark.parametrize(("exponent", "n_electrons", "n_hits"), [(1, 4, 2), (2, 3, 3), (3, 5, 2), (5, 2, 1)])
def test_moves_replayed(exponent, n_electrons, n_hits, tau):
    walkers = Walkers(exponent, n_electrons, tau, 10)
    n_accepted = same_moves(walkers, 2.0 * math.sqrt(exponent), 6, n_hits)
    proposals = 6 * n_hits * n_electrons * LANES
    assert 0.05 * proposals < n_accepted.sum() < 0.95 * proposals


@pytest.mark.parametrize("tau", MODULI)
def test_moves_replayed_after_many_sweeps_from_stored_values(tau):
    walkers = Walkers(3, 20, tau, 11)
    walkers.advance(4.0, 2000)
    same_moves(walkers, 4.0, 1)


def test_the_replay_sees_faults():
    for fault in ({"replayed_exponent": 3.3}, {"replayed_step": 4.0 * (1.0 + 1e-8)}):
        with pytest.raises(AssertionError):
            same_moves(Walkers(3, 5, MODULI[2], 10), 4.0, 12, **fault)


@pytest.mark.parametrize("tau", MODULI)
@pytest.mark.parametrize("n_electrons", [2, 5, 30])
def test_stored_sums_do_not_drift(n_electrons, tau):
    walkers = Walkers(3, n_electrons, tau, 12)
    walkers.advance(5.0, 1000)
    kept_phases, kept = walkers.phases.copy(), walkers.sums.copy()
    refresh_phases(walkers.tables, walkers.a, walkers.b, walkers.phases, walkers.sums)
    # Phases are stored as they were when the electron moved: nothing adds up.
    np.testing.assert_allclose(kept_phases, walkers.phases, rtol=1e-13, atol=0.0)
    # The greatest effect on 2 Re sum_k c_k (w^k Q_k + w^-k P_k), |w|^k between exp(-+pi k Im tau).
    n_powers = len(walkers.tables.far)
    k = np.arange(1, n_powers + 1)
    weight = 2.0 * np.hypot(*walkers.tables.far.T) * np.exp(math.pi * k * tau.imag)
    error = np.abs(kept[:-1] - walkers.sums[:-1]).reshape(n_powers, 4, LANES).sum(axis=1)
    assert (walkers.exponent * weight @ error).max() < 1e-11


def test_four_hundred_electrons_keep_moving():
    for tau in (1j, 28j):
        walkers = Walkers(3, 400, tau, 13)
        before = walkers.a.copy(), walkers.b.copy()
        walkers.advance(1.0, 1)
        assert np.all(np.isfinite(walkers.sums))
        for array, old in ((walkers.a, before[0]), (walkers.b, before[1])):
            assert np.abs(array).max() <= 0.5
            assert np.mean(array != old) > 0.1


def pair_modes(exponent, tau):
    """Exact means of cos 2 pi (n1 a + n2 b) over |s(z)|^2m by the trapezoidal rule in one cell."""
    grid = np.arange(64) / 64.0 + 1.0 / 128.0
    a, b = np.meshgrid(grid - 0.5, grid - 0.5)
    weight = np.exp(exponent * log_pair_factor(a, b, tau))
    return np.array([np.sum(weight * np.cos(2.0 * math.pi * (n1 * a + n2 * b))) for n1, n2 in MODES]) / weight.sum()


MODES = [(0, 1), (1, 0), (1, 1), (1, -1), (0, 2), (2, 0), (2, 1), (1, 2)]


@pytest.fixture(scope="module")
def sampled_modes():
    """Batch means of the modes of two electrons, shape (n_batches, n_modes), by exponent and modulus."""

    def sample(exponent, tau):
        state = Laughlin(exponent, 2, TorusFrame.of(Cell.from_tau(tau, 2 * exponent)))
        start = Walkers(exponent, 2, tau, 14)
        group = state.group(start.a, start.b, start.words)
        group.advance(3.0, 50)
        differences = np.empty((30000, 2, LANES))
        for k in range(len(differences)):
            group.advance(0.5 * state.frame.isotropic.side, 3)
            differences[k] = group.a[0] - group.a[1], group.b[0] - group.b[1]
        turns = np.einsum("nc,kcl->kln", np.array(MODES), differences)
        return np.cos(2.0 * math.pi * turns).reshape(120, 250, LANES, len(MODES)).mean(axis=1).reshape(-1, len(MODES))

    return {key: sample(*key) for key in [(1, 1j), (2, complex(-0.4, 1.2)), (3, complex(0.5, math.sqrt(0.75)))]}


def is_stationary(batches, exponent, tau):
    """Hotelling's statistic of all modes together, at the odds of |z| = 4."""
    deviation = batches.mean(axis=0) - pair_modes(exponent, tau)
    covariance = np.cov(batches.T) / len(batches)
    assert deviation @ np.linalg.solve(covariance, deviation) < stats.chi2.isf(6.3e-5, len(MODES))


def test_two_electrons_have_their_distribution(sampled_modes):
    for (exponent, tau), batches in sampled_modes.items():
        is_stationary(batches, exponent, tau)


def test_another_distribution_is_refused(sampled_modes):
    for (exponent, tau), batches in sampled_modes.items():
        with pytest.raises(AssertionError):
            is_stationary(batches, exponent * 1.05, tau)
        with pytest.raises(AssertionError):
            is_stationary(batches, exponent, tau + 0.04)
