"""All states of the torus on tiny systems; made to run with the compiler switched off and on."""

from fractions import Fraction

import numpy as np
import pytest

from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.kernels.lanes import LANES
from mcgeo.states.registry import TORUS_STATES

STATES = {
    "laughlin": {"exponent": 3, "electrons": 4},
    "moore_read": {"filling": "1/2", "electrons": 4, "sector": "all"},
    "fermi_sea": {"filling": "1/2", "electrons": 4, "points": [[0, 0], [1, 0], [0, 1], [1, 1]]},
}


def torus_states(kind):
    keys = STATES[kind]
    filling = Fraction(1, keys["exponent"]) if "exponent" in keys else Fraction(keys["filling"])
    frame = TorusFrame.of(Cell.from_tau(complex(0.2, 1.1), int(keys["electrons"] / filling)))
    return TORUS_STATES[kind](keys, frame)


def positions(state, seed):
    return np.random.default_rng(seed).uniform(-0.2, 0.2, (2, state.n_electrons, LANES))


@pytest.mark.parametrize("kind", STATES)
def test_weights_are_periodic_and_blind_to_the_order(kind):
    for state in torus_states(kind):
        a, b = positions(state, 1)
        before = state.log_weight(a, b)
        np.testing.assert_allclose(state.log_weight(a[::-1].copy(), b[::-1].copy()), before, atol=1e-9)
        for shift_a, shift_b in [(1.0, 0.0), (0.0, -1.0), (0.0, 1.0)]:
            # The electron shifted lies across the middle, so that no two are more than one cell apart.
            b[1] = -0.25 * shift_b
            moved_a, moved_b = a.copy(), b.copy()
            moved_a[1] += shift_a
            moved_b[1] += shift_b
            np.testing.assert_allclose(state.log_weight(moved_a, moved_b), state.log_weight(a, b), atol=1e-9)
        assert before.std() > 0.1


@pytest.mark.parametrize("kind", STATES)
def test_moves_keep_stored_values_true(kind):
    for state in torus_states(kind):
        a, b = positions(state, 2)
        words = np.random.default_rng(3).integers(0, 2**64, (4, LANES), dtype=np.uint64)
        group = state.group(a.copy(), b.copy(), words.copy())
        group.advance(state.first_step, 2)
        proposals = 2 * state.n_electrons * state.proposals_per_sweep
        assert np.all(group.accepted <= proposals)
        assert 0.05 < group.accepted.mean() / proposals < 0.95
        assert np.all(group.words != words)
        assert group.drift() < 1e-9
        assert np.all(np.isfinite(state.log_weight(group.a, group.b)))


@pytest.mark.parametrize("kind", STATES)
def test_forces_are_slopes_of_the_weight(kind):
    for state in torus_states(kind):
        a, b = positions(state, 4)
        group = state.group(a.copy(), b.copy(), np.ones((4, LANES), dtype=np.uint64))
        step = 1e-5 / state.frame.isotropic.side
        ahead, behind = a.copy(), a.copy()
        ahead[1] += step
        behind[1] -= step
        slope = (state.log_weight(ahead, b) - state.log_weight(behind, b)) / 2e-5
        np.testing.assert_allclose(group.forces()[2], slope, rtol=1e-5, atol=1e-5)
