"""Moore-Read droplet: its Pfaffian written out, and what is kept between moves."""

import mpmath
import numpy as np
import pytest

from mcgeo.errors import GeometryError
from mcgeo.kernels.lanes import LANES
from mcgeo.states.droplet import mean_square_radius
from mcgeo.states.moore_read_droplet import MooreReadDroplet


def start(droplet, seed):
    random = np.random.default_rng(seed)
    pairs = [droplet.start(random) for _ in range(LANES)]
    x, y = (np.ascontiguousarray(np.transpose(part)) for part in zip(*pairs, strict=True))
    return x, y, random.integers(0, 2**64, (4, LANES), dtype=np.uint64)


def pfaffian(z):
    """Sum over all pairings, with signs, of prod 1/(z_i - z_j)."""
    if not z:
        return mpmath.mpf(1)
    rest = z[1:]
    return sum((-1) ** k * pfaffian(rest[:k] + rest[k + 1 :]) / (z[0] - rest[k]) for k in range(len(rest)))


@pytest.mark.parametrize("n_electrons", [2, 4, 8])
@pytest.mark.parametrize("exponent", [1, 2])
def test_weight_with_all_pairings(exponent, n_electrons):
    droplet = MooreReadDroplet(exponent, n_electrons)
    x, y, _ = start(droplet, 1)
    found = droplet.log_weight(x, y)
    for lane in range(2):
        with mpmath.workdps(40):
            z = [mpmath.mpc(*pair) for pair in zip(x[:, lane].tolist(), y[:, lane].tolist(), strict=True)]
            product = pfaffian(z)
            for i in range(n_electrons):
                for j in range(i):
                    product *= (z[i] - z[j]) ** exponent
            exact = 2 * mpmath.log(abs(product)) - mpmath.fsum(abs(w) ** 2 for w in z) / 2
        assert found[lane] == pytest.approx(float(exact), abs=1e-10)


@pytest.mark.parametrize(("n_electrons", "n_sweeps"), [(2, 5000), (6, 5000), (30, 500)])
def test_inverses_stay_good(n_electrons, n_sweeps):
    droplet = MooreReadDroplet(2, n_electrons)
    group = droplet.group(*start(droplet, 2))
    group.advance(droplet.first_step, n_sweeps)
    assert 0.2 < group.accepted.mean() / (n_sweeps * n_electrons * droplet.proposals_per_sweep) < 0.6
    assert 0.0 < group.drift() < 1e-9
    # `drift` has made the inverses anew: nothing is left of the error.
    assert group.drift() == 0.0


def test_droplet_is_described():
    assert [MooreReadDroplet(m, 6).statistics for m in (1, 2)] == ["bosons", "fermions"]
    assert MooreReadDroplet(2, 6).angular_momentum == 27
    assert mean_square_radius(MooreReadDroplet(2, 6)) == 11.0


def test_odd_number_of_electrons_is_refused():
    with pytest.raises(GeometryError, match="even number of electrons, not 5"):
        MooreReadDroplet(2, 5)
