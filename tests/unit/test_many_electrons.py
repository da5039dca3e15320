"""Guards against overflow and drift at the sizes where products of all pairs leave the range of a float."""

import math

import numpy as np
import pytest

from mcgeo.errors import GeometryError
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.kernels.lanes import LANES
from mcgeo.states.laughlin import Laughlin
from mcgeo.states.laughlin_droplet import LaughlinDroplet
from mcgeo.states.moore_read import MooreRead
from tests.exact.moore_read_theta import log_weight as moore_read_log_weight
from tests.exact.torus_theta import log_pair_factor
from tests.exact.xoshiro import uniforms

HEXAGONAL, LONG = complex(0.5, math.sqrt(0.75)), complex(0.2, 27.9)


def words(seed):
    return np.random.default_rng(seed).integers(0, 2**64, (4, LANES), dtype=np.uint64)


def replayed_laughlin(state, group, step, n_moved):
    """One proposal for each of the first electrons in turn, weights by the series of theta_1 of all pairs.

    Positions as differences from the lattice, and the number of moves accepted.
    """
    a, b = group.a.copy(), group.b.copy()
    cell = state.frame.isotropic
    streams = [uniforms(group.words[:, lane].tolist()) for lane in range(LANES)]
    accepted = np.zeros(LANES)
    for i in range(n_moved):
        for array in (a, b):
            array[[i, -1]] = array[[-1, i]]
        for _ in range(state.proposals_per_sweep):
            ux, uy, u = np.array([[next(stream) for _ in range(3)] for stream in streams]).T
            dx, dy = step * (ux - 0.5), step * (uy - 0.5)
            new_b = b[-1] + dy / (cell.side * cell.tau.imag)
            new_a = a[-1] + dx / cell.side - (new_b - b[-1]) * cell.tau.real
            new_a, new_b = new_a - np.rint(new_a), new_b - np.rint(new_b)
            gain = log_pair_factor(new_a - a[:-1], new_b - b[:-1], cell.tau).sum(axis=0)
            gain -= log_pair_factor(a[-1] - a[:-1], b[-1] - b[:-1], cell.tau).sum(axis=0)
            accept = u < np.exp(np.minimum(state.exponent * gain, 0.0))
            a[-1], b[-1] = np.where(accept, new_a, a[-1]), np.where(accept, new_b, b[-1])
            accepted += accept
    return a, b, accepted


@pytest.mark.parametrize(("exponent", "n_electrons", "tau"), [(3, 400, HEXAGONAL), (5, 130, LONG)])
def test_moves_of_many_laughlin_electrons(exponent, n_electrons, tau):
    state = Laughlin(exponent, n_electrons, TorusFrame.of(Cell.from_tau(tau, exponent * n_electrons)))
    a, b = np.random.default_rng(1).uniform(-0.5, 0.5, (2, n_electrons, LANES))
    group = state.group(a, b, words(2))
    # In equilibrium, where weights are largest; values stored over these sweeps are used as they stand.
    group.advance(3.0, 20)
    group.accepted[:] = 0.0
    expected = replayed_laughlin(state, group, 3.0, n_electrons)
    group.advance(3.0, 1)
    np.testing.assert_array_equal(group.accepted[0], expected[2])
    for found, exact in zip((group.a, group.b), expected, strict=False):
        difference = found - exact
        assert np.abs(difference - np.rint(difference)).max() < 1e-11
    assert group.drift() < 1e-10


def droplet_log_weight(exponent, x, y):
    """2m sum log |z_i - z_j| - sum |z|^2/2 in extended precision, logarithm by logarithm."""
    z_x, z_y = np.asarray(x, dtype=np.longdouble), np.asarray(y, dtype=np.longdouble)
    i, j = np.tril_indices(len(x), -1)
    pairs = np.log((z_x[i] - z_x[j]) ** 2 + (z_y[i] - z_y[j]) ** 2).sum(axis=0)
    return exponent * pairs - (z_x**2 + z_y**2).sum(axis=0) / 2


def test_weight_of_many_droplet_electrons_in_extended_precision():
    droplet = LaughlinDroplet(3, 400)
    random = np.random.default_rng(3)
    x, y = (np.ascontiguousarray(part) for part in np.moveaxis([droplet.start(random) for _ in range(LANES)], 0, 2))
    group = droplet.group(x, y, words(4))
    for _ in range(2):
        exact = droplet_log_weight(3, group.a, group.b).astype(float)
        np.testing.assert_allclose(droplet.log_weight(group.a, group.b), exact, rtol=1e-13)
        group.advance(droplet.first_step, 10)


@pytest.mark.parametrize("sector", [1, 2])
def test_weight_of_many_paired_electrons(sector):
    # Stored over forty sweeps, then made anew: nothing has drifted; and the weight is that of theta functions.
    state = MooreRead(2, 100, TorusFrame.of(Cell.from_tau(HEXAGONAL, 200)), sector)
    a, b = np.random.default_rng(5).uniform(-0.5, 0.5, (2, 100, LANES))
    before, start = state.log_weight(a, b), (a.copy(), b.copy())
    group = state.group(a, b, words(6))
    group.advance(3.0, 40)
    assert group.drift() < 1e-9
    change = state.log_weight(group.a, group.b) - before
    tau = state.frame.isotropic.tau
    for lane in (0, 5):
        new, old = (
            moore_read_log_weight(2, sector, x[:, lane], y[:, lane], tau) for x, y in ((group.a, group.b), start)
        )
        assert change[lane] == pytest.approx(float(new - old), rel=1e-11, abs=1e-7)


@pytest.mark.parametrize("make", [lambda frame: Laughlin(3, 20, frame), lambda frame: MooreRead(3, 20, frame, 1)])
def test_metrics_beyond_reach_are_refused_with_the_range_that_works(make):
    # Aspect ratio 30 along the side of a square.
    frame = TorusFrame.of(Cell.from_shape("square", 60), UnimodularMetric(math.log(30.0)))
    with pytest.raises(GeometryError, match=r"Im\(tau\) in the state's metric is 30; at most 28 works"):
        make(frame)
    make(TorusFrame.of(Cell.from_shape("square", 60), UnimodularMetric(math.log(27.0))))
