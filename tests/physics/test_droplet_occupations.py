"""Occupations fitted to sampled droplets, and what a scan makes of them, against exact droplets of few electrons."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest

from mcgeo.estimate.statistics import mean_estimate
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.problem import Problem
from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.droplet import Droplet
from mcgeo.runs.sample import sample
from mcgeo.runs.scan import scan, scan_summary
from mcgeo.sampling.droplet_measurement import ELECTRON_BACKGROUND, ELECTRON_ELECTRON
from mcgeo.variational.droplet_surface import DropletInteraction, DropletSurface
from mcgeo.variational.minimum import find_minimum
from tests.exact.droplet_values import LAUGHLIN, MOORE_READ
from tests.physics.checks import require_agreement, require_unit_pulls
from tests.physics.exact_droplets import Key, exact_occupations

KEYS: list[Key] = [(LAUGHLIN, 1, 4), (LAUGHLIN, 3, 3), (LAUGHLIN, 3, 4), (LAUGHLIN, 2, 4), (MOORE_READ, 2, 4)]
ORBIT = UnimodularMetric(math.log(2.0), 0.3)
HOLE = UnimodularMetric(0.4, 0.1)
PROBLEM_KEYS = {
    "mass": {"ratio": 4.0, "angle_degrees": 20.0},
    "interaction": {"kind": "coulomb"},
    "level": 0,
    "variation": "projected",
    "level_mixing": None,
}
SCAN_KEYS = {"stretch": {"from": 0.0, "to": 0.6, "points": 3}, "angle_degrees": None}


@pytest.fixture(scope="module")
def droplet(tmp_path_factory: pytest.TempPathFactory) -> Callable[[Key], Droplet]:
    """``droplet(key)``: the sampled droplet, from memory when asked again."""
    kept: dict[Key, Droplet] = {}

    def sampled(key: Key) -> Droplet:
        if key not in kept:
            kind, exponent, electrons = key
            filling = {"exponent": exponent} if kind == LAUGHLIN else {"filling": f"1/{exponent}"}
            config = config_from_resolved(
                {
                    "state": {"kind": kind, "electrons": electrons, **filling},
                    "geometry": {"kind": "disk"},
                    "sampling": {
                        "walkers": 32, "sweeps": 20000 if kind == LAUGHLIN else 10000, "blocks": 16,
                        "equilibration": 400, "seed": 11 + KEYS.index(key), "threads": 1,
                    },
                }
            )  # fmt: skip
            found = sample(config, tmp_path_factory.mktemp("droplet"), quiet=True)
            assert isinstance(found, Droplet)
            kept[key] = found
        return kept[key]

    return sampled


def require_occupations(droplet: Droplet, key: Key) -> None:
    """Every n_l and w_l within its error; what the rules fix has none."""
    found, exact = droplet.occupations, exact_occupations(key)
    np.testing.assert_array_equal(found.pair_momenta, exact.pair_momenta)
    for samples, expected in (
        (found.orbital_samples, exact.orbital_samples[0]),
        (found.pair_samples, exact.pair_samples[0]),
    ):
        estimates = [mean_estimate(column) for column in samples.T]
        require_agreement([e.value for e in estimates], [e.error for e in estimates], expected, 1e-9)


@pytest.mark.parametrize("key", KEYS, ids=str)
def test_occupations(droplet: Callable[[Key], Droplet], key: Key) -> None:
    require_occupations(droplet(key), key)


def test_wrong_occupations_fail(droplet: Callable[[Key], Droplet]) -> None:
    # Pairs moved inwards by a few in a hundred.
    found, exact = droplet((MOORE_READ, 2, 4)).occupations, exact_occupations((MOORE_READ, 2, 4))
    wrong = exact.pair_samples[0] * np.linspace(1.05, 0.95, len(exact.pair_momenta))
    estimates = [found.pair(index) for index in range(len(wrong))]
    with pytest.raises(AssertionError):
        require_agreement([e.value for e in estimates], [e.error for e in estimates], wrong / wrong.sum(), 1e-9)


@pytest.mark.parametrize("key", KEYS, ids=str)
def test_rules_hold_in_every_sample(droplet: Callable[[Key], Droplet], key: Key) -> None:
    found, state = droplet(key).occupations, droplet(key).state
    n = state.n_electrons
    orbitals = np.arange(found.orbital_samples.shape[1])
    np.testing.assert_allclose(found.orbital_samples.sum(axis=1), n, rtol=1e-10)
    np.testing.assert_allclose(found.orbital_samples @ orbitals, state.angular_momentum, rtol=1e-10)
    np.testing.assert_allclose(found.pair_samples.sum(axis=1), 1.0, rtol=1e-10)
    np.testing.assert_allclose(found.pair_samples @ found.pair_momenta, state.angular_momentum / (n - 1), rtol=1e-10)
    assert found.pair_samples.mean(axis=0).min() > -1e-9
    assert len(found.pair_samples) == 16 * 32


def energy_pull(droplet: Droplet, key: Key, problem: Problem, metric: UnimodularMetric) -> float:
    exact = DropletInteraction(exact_occupations(key)).mean(problem, metric)
    found = mean_estimate(DropletSurface(droplet.interaction, problem).sample_energies(metric))
    assert found.error < 1e-3
    return (found.value - exact) / found.error


@pytest.mark.parametrize("level", [0, 1])
@pytest.mark.parametrize("metrics", [(ISOTROPIC, ISOTROPIC), (ORBIT, HOLE)], ids=["round", "stretched"])
def test_energies(
    droplet: Callable[[Key], Droplet], metrics: tuple[UnimodularMetric, UnimodularMetric], level: int
) -> None:
    orbit, hole = metrics
    pulls = [energy_pull(droplet(key), key, Problem(orbit, Coulomb(), level), hole) for key in KEYS]
    require_unit_pulls(pulls)


@pytest.mark.parametrize("key", KEYS, ids=str)
def test_energy_is_that_of_the_pairs_as_they_lie(droplet: Callable[[Key], Droplet], key: Key) -> None:
    # From the same blocks, of which the pair counts hold every second configuration.
    found = droplet(key)
    fitted = DropletSurface(found.interaction, Problem(ISOTROPIC, Coulomb())).sample_energies(ISOTROPIC)
    n = found.state.n_electrons
    direct = (found.samples(ELECTRON_ELECTRON) + found.samples(ELECTRON_BACKGROUND)) / n
    difference = mean_estimate(fitted - direct)
    require_agreement(difference.value, difference.error, found.state.background.self_energy / n)
    assert mean_estimate(fitted).error < 1.3 * mean_estimate(direct).error


class Doubled(DropletSurface):
    """A jackknife needs two samples."""

    def sample_energies(self, metric: UnimodularMetric) -> np.ndarray:
        return np.repeat(super().sample_energies(metric), 2)


@pytest.mark.parametrize("key", [key for key in KEYS if key[1] > 1], ids=str)
def test_optimum(droplet: Callable[[Key], Droplet], key: Key) -> None:
    scanned = scan(droplet(key), PROBLEM_KEYS, SCAN_KEYS)
    exact = find_minimum(Doubled(DropletInteraction(exact_occupations(key)), scanned.problem))
    found = scanned.minimum.stretch
    assert exact.interior and scanned.minimum.interior
    require_agreement(found.value, found.error, exact.metric.stretch)
    # An orbit of one percent more stretch is told apart.
    other = scanned.problem.with_mass(UnimodularMetric(1.01 * math.log(2.0), math.radians(20.0)))
    wrong = find_minimum(Doubled(DropletInteraction(exact_occupations(key)), other)).metric.stretch
    with pytest.raises(AssertionError):
        require_agreement(found.value, found.error, wrong)
    assert scanned.minimum.metric.angle == pytest.approx(math.radians(20.0))
    require_agreement(scanned.minimum.energy.value, scanned.minimum.energy.error, exact.energy.value)
    assert 0.0 < scanned.response.response.value < 1.0


def test_summary_has_the_keys_of_a_liquid(droplet: Callable[[Key], Droplet]) -> None:
    found = droplet((LAUGHLIN, 3, 3))
    summary = scan_summary(found, PROBLEM_KEYS, scan(found, PROBLEM_KEYS, SCAN_KEYS))
    assert set(summary) == {"state", "problem", "optimum", "curve", "diagnostics"}
    assert [point["stretch"] for point in summary["curve"]] == pytest.approx([0.0, 0.3, 0.6])
    assert summary["state"]["liquid_electrons"] == 3
