"""The Moore-Read state on the torus: its weight against theta functions, its symmetries, its moves replayed."""

import math
from fractions import Fraction

import mpmath
import numpy as np
import pytest

from mcgeo.errors import GeometryError
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.kernels.lanes import LANES
from mcgeo.states.moore_read import MooreRead
from tests.exact.moore_read_theta import log_weight, log_weight_mpmath
from tests.exact.xoshiro import uniforms

HEXAGONAL = complex(0.5, math.sqrt(0.75))
MODULI = [1j, HEXAGONAL, -HEXAGONAL.conjugate(), -0.45 + 0.9j, 0.3 + 1.2j, 0.1 + 3j, -0.2 + 8j, 0.25 + 25j]
SECTORS = [1, 2, 3]


def moore_read(exponent, n_electrons, tau, sector):
    return MooreRead(exponent, n_electrons, TorusFrame.of(Cell.from_tau(tau, exponent * n_electrons)), sector)


def positions(n_electrons, seed):
    a, b = np.random.default_rng(seed).uniform(-0.5, 0.5, (2, n_electrons, LANES))
    return a, b


def walkers(state, seed, step=None, n_sweeps=0):
    words = np.random.default_rng(seed).integers(0, 2**64, (4, LANES), dtype=np.uint64)
    group = state.group(*positions(state.n_electrons, seed), words)
    group.advance(step or state.first_step, n_sweeps)
    return group


@pytest.mark.parametrize("sector", SECTORS)
@pytest.mark.parametrize("tau", MODULI)
@pytest.mark.parametrize(("exponent", "n_electrons"), [(1, 6), (2, 2), (2, 4)])
def test_weight_is_that_of_all_pairings(exponent, n_electrons, tau, sector):
    state = moore_read(exponent, n_electrons, tau, sector)
    before, after = positions(n_electrons, 1), positions(n_electrons, 2)
    found = state.log_weight(*after) - state.log_weight(*before)
    with mpmath.workdps(40):
        # The frame takes tau to the edge of the fundamental domain within rounding.
        modulus = state.frame.isotropic.tau
        for lane in range(2):
            new, old = (
                log_weight_mpmath(exponent, sector, a[:, lane], b[:, lane], modulus) for a, b in (after, before)
            )
            assert found[lane] == pytest.approx(float(new - old), abs=1e-10)


@pytest.mark.parametrize("sector", SECTORS)
@pytest.mark.parametrize("tau", MODULI)
def test_weight_is_periodic_in_every_electron(tau, sector):
    state = moore_read(2, 12, tau, sector)
    for coordinate in (0, 1):
        for electron in (0, 5, 11):
            place = positions(12, 3)
            place[coordinate][electron] = 0.5
            before = state.log_weight(*place)
            place[coordinate][electron] = -0.5
            np.testing.assert_allclose(state.log_weight(*place), before, rtol=0.0, atol=1e-10)


@pytest.mark.parametrize("sector", SECTORS)
def test_weight_does_not_depend_on_the_order_or_a_common_shift(sector):
    state = moore_read(1, 10, 0.3 + 1.2j, sector)
    a, b = (0.4 * x for x in positions(10, 4))
    weight = state.log_weight(a, b)
    order = np.random.default_rng(5).permutation(10)
    np.testing.assert_allclose(state.log_weight(a[order], b[order]), weight, atol=1e-10)
    np.testing.assert_allclose(state.log_weight(a - 0.27, b + 0.19), weight, atol=1e-10)


def test_quarter_turn_of_the_square_exchanges_sectors_1_and_3():
    a, b = positions(8, 6)
    turned = -b, a
    weights = [moore_read(2, 8, 1j, sector).log_weight(a, b) for sector in SECTORS]
    after = [moore_read(2, 8, 1j, sector).log_weight(*turned) for sector in SECTORS]
    # Constants differ from sector to sector, so walkers are compared with one another.
    for one, other in ((0, 2), (1, 1), (2, 0)):
        np.testing.assert_allclose(np.diff(after[one]), np.diff(weights[other]), atol=1e-9)
    assert np.abs(np.diff(weights[0]) - np.diff(weights[2])).max() > 0.1


@pytest.mark.parametrize("tau", [1j, HEXAGONAL, 0.25 + 25j])
def test_weight_of_many_electrons_is_finite(tau):
    state = moore_read(2, 100, tau, 2)
    assert np.all(np.isfinite(state.log_weight(*positions(100, 7))))


def replay(state, group, step, n_sweeps):
    """The same Metropolis moves with theta functions: positions and the number accepted by every walker."""
    a, b, tau, side = group.a.copy(), group.b.copy(), state.frame.isotropic.tau, state.frame.isotropic.side
    n_accepted = np.zeros(LANES)
    for lane in range(LANES):
        stream = uniforms(group.words[:, lane].tolist())
        weight = log_weight(state.exponent, state.sector, a[:, lane], b[:, lane], tau)
        for i in list(range(state.n_electrons)) * n_sweeps:
            for _ in range(state.proposals_per_sweep):
                dx, dy, u = step * (next(stream) - 0.5), step * (next(stream) - 0.5), next(stream)
                new_a, new_b = a[:, lane].copy(), b[:, lane].copy()
                new_b[i] += dy / (side * tau.imag)
                new_a[i] += dx / side - dy * tau.real / (side * tau.imag)
                new_a, new_b = new_a - np.rint(new_a), new_b - np.rint(new_b)
                new_weight = log_weight(state.exponent, state.sector, new_a, new_b, tau)
                if math.log(u) < new_weight - weight:
                    a[:, lane], b[:, lane], weight = new_a, new_b, new_weight
                    n_accepted[lane] += 1
    return a, b, n_accepted


@pytest.mark.parametrize("sector", SECTORS)
@pytest.mark.parametrize(
    ("exponent", "n_electrons", "tau"),
    [(1, 4, 1j), (2, 6, HEXAGONAL), (2, 10, -0.3 + 1.1j), (1, 2, 0.2 + 4j), (2, 4, 0.1 + 12j)],
)
def test_moves_replayed(exponent, n_electrons, tau, sector):
    state = moore_read(exponent, n_electrons, tau, sector)
    group = walkers(state, 8)
    a, b, n_accepted = replay(state, group, 3.0, 4)
    group.advance(3.0, 4)
    np.testing.assert_array_equal(group.accepted[0], n_accepted)
    np.testing.assert_allclose(group.a, a, atol=1e-10)
    np.testing.assert_allclose(group.b, b, atol=1e-10)
    assert 0 < n_accepted.sum() < 4 * LANES * n_electrons * state.proposals_per_sweep


@pytest.mark.parametrize(
    ("exponent", "n_electrons", "tau", "sector", "n_sweeps"),
    [(2, 6, 1j, 1, 3000), (1, 20, HEXAGONAL, 2, 1000), (1, 20, 12j, 3, 300), (2, 100, 1j, 3, 30)],
)
def test_inverses_stay_good(exponent, n_electrons, tau, sector, n_sweeps):
    state = moore_read(exponent, n_electrons, tau, sector)
    group = walkers(state, 9, n_sweeps=n_sweeps)
    assert 0.0 < group.drift() < 1e-9
    # `drift` has made the inverses anew: nothing is left of the error.
    assert group.drift() == 0.0


@pytest.mark.parametrize("spoil", [lambda x: x * (1.0 + 1e-7), lambda x: x + np.nan])
def test_inverse_that_has_lost_precision_is_made_anew(spoil):
    state = moore_read(2, 10, HEXAGONAL, 2)
    good, spoilt = (walkers(state, 10, n_sweeps=20) for _ in range(2))
    inverses = spoilt._storage.inverses
    inverses[3] = spoil(inverses[3])
    for group in (good, spoilt):
        group.advance(3.0, 20)
    np.testing.assert_allclose(spoilt.a, good.a, atol=1e-12)
    assert spoilt.drift() < 1e-9


def test_refreshed_walkers_go_on_alike():
    state = moore_read(1, 8, 1j, 1)
    group = walkers(state, 11, n_sweeps=5)
    again = state.group(group.a.copy(), group.b.copy(), group.words.copy())
    group.refresh()
    for continued in (group, again):
        continued.advance(3.0, 5)
    np.testing.assert_array_equal(group.a, again.a)


def test_state_is_described():
    bosons, fermions = (moore_read(m, 6, 1j, 2) for m in (1, 2))
    assert (bosons.filling, bosons.statistics, bosons.shift, bosons.first_occupied) == (1, "bosons", 2, 0)
    assert (fermions.filling, fermions.statistics) == (Fraction(1, 2), "fermions")
    assert (fermions.shift, fermions.first_occupied) == (3, 1)
    assert fermions.label.startswith("Moore-Read 1/2")


def test_what_cannot_be_paired_or_resolved_is_refused():
    with pytest.raises(GeometryError, match="even number of electrons, not 5"):
        moore_read(2, 5, 1j, 1)
    with pytest.raises(GeometryError, match="too elongated"):
        moore_read(2, 4, 30j, 1)
