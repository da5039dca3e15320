"""Droplets in the plane: energies, densities and shapes against exact values of few electrons.

Tables: exact rational polynomial expansion, computed independently of this package (`tests.exact.droplet_values`). The
occupations, <r^2> and the total angular momentum are exact properties of the polynomials.
"""

from __future__ import annotations

import math
import threading
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.special import gammainc

from mcgeo.estimate.droplet import DropletEnergies, droplet_energies, electrons_on_rings, radial_density
from mcgeo.estimate.statistics import mean_estimate
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.sampling.chain import Schedule, equilibrated, next_block
from mcgeo.sampling.droplet_measurement import RADIAL_BIN_WIDTH, DropletMeasurement
from mcgeo.states.droplet import DropletState, mean_square_radius
from mcgeo.states.laughlin_droplet import LaughlinDroplet
from mcgeo.states.moore_read_droplet import MooreReadDroplet
from tests.exact.droplet_values import ENERGIES, LAUGHLIN, MOORE_READ, OCCUPATIONS
from tests.physics.checks import mean_probability, require_agreement, require_unit_pulls
from tests.physics.closed_forms import agm_factor

Array = NDArray[np.float64]
Key = tuple[str, int, int]

KINDS = {LAUGHLIN: LaughlinDroplet, MOORE_READ: MooreReadDroplet}
TILTED = UnimodularMetric(math.log(2.0), 0.3)


@dataclass(frozen=True)
class Sampled:
    """Block means of one droplet; blocks last a hundred autocorrelation times, so each is one independent sample."""

    state: DropletState
    means: dict[str, Array]
    radial: NDArray[np.int64]
    positions: Array
    measurements: int

    @property
    def energies(self) -> DropletEnergies:
        m = self.means
        return droplet_energies(
            self.state, m["electron_electron"], m["electron_electron_lab"], m["electron_background"]
        )


def run(state: DropletState, seed: int, n_blocks: int, measurements: int = 200) -> Sampled:
    schedule = Schedule(32, n_blocks, measurements, state.sweeps_per_measurement, 400, None, seed, 1)
    stop = threading.Event()
    chain = equilibrated(state, schedule, stop)
    measurement, records, positions = DropletMeasurement(state), [], []
    for _ in range(n_blocks):
        chain, record = next_block(state, measurement, schedule, chain, stop)
        records.append(record)
        positions.append(np.stack([chain.walkers.a, chain.walkers.b], axis=-1))
    means = {name: np.concatenate([r.means[name] for r in records]) for name in records[0].means}
    radial = np.concatenate([r.counts["radial"] for r in records])
    assert max(r.drift for r in records) < 1e-9
    return Sampled(state, means, radial, np.array(positions), measurements)


@pytest.fixture(scope="module")
def droplet() -> Callable[..., Sampled]:
    """``droplet(key, metric)``: the sampled droplet, from memory when asked again."""
    kept: dict[tuple[Key, UnimodularMetric], Sampled] = {}

    def sampled(key: Key, metric: UnimodularMetric = ISOTROPIC) -> Sampled:
        if (key, metric) not in kept:
            kind, exponent, n_electrons = key
            n_blocks = 16 if n_electrons <= 6 else 4
            state = KINDS[kind](exponent, n_electrons, metric)
            kept[key, metric] = run(state, 100 + list(ENERGIES).index(key), n_blocks)
        return kept[key, metric]

    return sampled


def require_energies(energies: DropletEnergies, exact: tuple[float, ...], factor: float = 1.0) -> None:
    """All four numbers and the lab's pair energy; the tolerance is the rounding of the tables."""
    ee, eb, bb, total = (factor * value for value in exact)
    for found, value in (
        (energies.electron_electron, ee),
        (energies.electron_electron_lab, ee),
        (energies.electron_background, eb),
        (energies.background_background, bb),
        (energies.total, total),
    ):
        require_agreement(found.value, found.error, value, 1e-9)


@pytest.mark.parametrize("key", ENERGIES, ids=str)
def test_energies(droplet: Callable[..., Sampled], key: Key) -> None:
    require_energies(droplet(key).energies, ENERGIES[key])


def test_errors_of_energies(droplet: Callable[..., Sampled]) -> None:
    totals = {key: droplet(key).energies.total for key in ENERGIES}
    require_unit_pulls([(found.value - ENERGIES[key][3]) / found.error for key, found in totals.items()])
    assert max(found.error for key, found in totals.items() if key[0] == LAUGHLIN) < 1e-3


def test_energies_of_wrong_states_fail(droplet: Callable[..., Sampled]) -> None:
    # The Pfaffian left out, and the Jastrow power of the other Moore-Read state.
    unpaired = droplet((LAUGHLIN, 2, 4)).energies
    with pytest.raises(AssertionError):
        require_energies(unpaired, ENERGIES[MOORE_READ, 2, 4])
    with pytest.raises(AssertionError):
        require_energies(droplet((MOORE_READ, 1, 4)).energies, ENERGIES[MOORE_READ, 2, 4])
    # Every length half a percent too short.
    key = (LAUGHLIN, 3, 6)
    means = {name: 1.005 * values for name, values in droplet(key).means.items()}
    close = droplet_energies(
        LaughlinDroplet(3, 6), means["electron_electron"], means["electron_electron_lab"], means["electron_background"]
    )
    with pytest.raises(AssertionError):
        require_agreement(close.electron_electron.value, close.electron_electron.error, ENERGIES[key][0])
    with pytest.raises(AssertionError):
        require_energies(close, ENERGIES[key])


def ring_edges(state: DropletState) -> Array:
    """Ten rings that hold like numbers of electrons, on the edges of the bins."""
    outer = state.background.radius + 1.5
    return np.unique(np.round(outer * np.sqrt(np.arange(11) / 10.0) / RADIAL_BIN_WIDTH)) * RADIAL_BIN_WIDTH


def ring_samples(sampled: Sampled, edges: Array) -> Array:
    """Electrons per configuration on the rings, shape (n_samples, n_rings)."""
    starts = np.round(edges[:-1] / RADIAL_BIN_WIDTH).astype(int)
    last = round(edges[-1] / RADIAL_BIN_WIDTH)
    return np.add.reduceat(sampled.radial[:, :last], starts, axis=1) / sampled.measurements


def exact_on_rings(occupations: Array, edges: Array) -> Array:
    """Orbital k lies within r with probability P(k + 1, r^2/2)."""
    inside = [n * gammainc(k + 1.0, 0.5 * edges**2) for k, n in enumerate(occupations)]
    return np.asarray(np.diff(np.sum(inside, axis=0)))


def occupations_of(key: Key) -> Array:
    denominator, numerators = OCCUPATIONS[key]
    return np.array(numerators) / denominator


@pytest.mark.parametrize("key", OCCUPATIONS, ids=str)
def test_density_from_occupations(droplet: Callable[..., Sampled], key: Key) -> None:
    sampled, occupations = droplet(key), occupations_of(key)
    assert occupations.sum() == pytest.approx(key[2], abs=1e-8)
    edges = ring_edges(sampled.state)
    samples = ring_samples(sampled, edges)
    assert 1e-4 < mean_probability(samples, exact_on_rings(occupations, edges)) < 1.0 - 1e-4
    # One part in ten of every orbital moved to the next one.
    wrong = 0.9 * np.append(occupations, 0.0) + 0.1 * np.append(0.0, occupations)
    assert mean_probability(samples, exact_on_rings(wrong, edges)) < 1e-4


def test_density_of_three_electrons_in_closed_form(droplet: Callable[..., Sampled]) -> None:
    sampled = droplet((LAUGHLIN, 3, 3))
    density = radial_density(sampled.radial, sampled.measurements, RADIAL_BIN_WIDTH)
    x = 0.5 * (0.5 * (density.edges[1:] + density.edges[:-1])) ** 2
    series = 7 + 9 * x + 9 * x**2 + 11 * x**3 / 3 + 7 * x**4 / 8 + x**5 / 10 + x**6 / 180
    exact = series * np.exp(-x) / (62.0 * math.pi)
    inside = density.edges[1:] < sampled.state.background.radius
    # Values at the middle of a bin differ from its mean by the curvature: (width^2/24) times 0.1 at most.
    require_agreement(density.density[inside], density.error[inside], exact[inside], 5e-5)
    occupations = occupations_of((LAUGHLIN, 3, 3))
    np.testing.assert_allclose(
        electrons_on_rings(occupations, density.edges), exact_on_rings(occupations, density.edges), atol=1e-12
    )


def test_mean_square_radii(droplet: Callable[..., Sampled]) -> None:
    pulls = []
    for key in ENERGIES:
        kind, exponent, n_electrons = key
        # From the total angular momentum: m(N - 1) + 2 and q(N - 1) + 1.
        exact = exponent * (n_electrons - 1) + (2 if kind == LAUGHLIN else 1)
        sampled = droplet(key)
        assert mean_square_radius(sampled.state) == exact
        found = mean_estimate(sampled.means["second_moments"][:, :2].sum(axis=1))
        pulls.append((found.value - exact) / found.error)
    require_unit_pulls(pulls)


STRETCHED = [(LAUGHLIN, 3, 2), (LAUGHLIN, 3, 4), (LAUGHLIN, 2, 5), (MOORE_READ, 2, 4), (MOORE_READ, 1, 6)]


@pytest.mark.parametrize("key", STRETCHED, ids=str)
def test_stretched_energies(droplet: Callable[..., Sampled], key: Key) -> None:
    energies = droplet(key, TILTED).energies
    require_energies(energies, ENERGIES[key], agm_factor(math.log(2.0)))
    with pytest.raises(AssertionError):
        require_energies(energies, ENERGIES[key])


def test_stretched_pair(droplet: Callable[..., Sampled]) -> None:
    energies = droplet((LAUGHLIN, 3, 2), TILTED).energies
    exact = 0.268851646917 / 2.0
    require_agreement(energies.electron_electron_lab.value, energies.electron_electron_lab.error, exact)
    require_agreement(energies.electron_electron.value, energies.electron_electron.error, exact)


def stretched_background_energies(sampled: Sampled) -> Array:
    """Energies per electron of whole configurations in the ellipse's field, from the positions in the lab."""
    lab = np.moveaxis(sampled.positions, -2, -3) @ sampled.state.metric.inverse_linear_map
    return np.ravel(sampled.state.background.potential(lab).mean(axis=-1))


def test_background_energy_from_positions_in_the_lab() -> None:
    # No use is made here of the average over directions.
    key = (LAUGHLIN, 3, 4)
    sampled = run(LaughlinDroplet(3, 4, TILTED), 7, n_blocks=60, measurements=10)
    found = mean_estimate(stretched_background_energies(sampled))
    require_agreement(found.value, found.error, agm_factor(math.log(2.0)) * ENERGIES[key][1])
    with pytest.raises(AssertionError):
        require_agreement(found.value, found.error, ENERGIES[key][1])


def require_quadrupole(sampled: Sampled, metric: UnimodularMetric) -> None:
    """<r_a r_b> = g^ab <r'^2>/2."""
    exponent, n_electrons = sampled.state.filling.denominator, sampled.state.n_electrons
    radius_sq = exponent * (n_electrons - 1) + (2 if sampled.state.kind == LAUGHLIN else 1)
    tensor = 0.5 * radius_sq * metric.inverse_matrix
    moments = sampled.means["second_moments"]
    assert mean_probability(moments, [tensor[0, 0], tensor[1, 1], tensor[0, 1]]) > 1e-4


@pytest.mark.parametrize("key", STRETCHED, ids=str)
def test_quadrupole_of_stretched_droplets(droplet: Callable[..., Sampled], key: Key) -> None:
    sampled = droplet(key, TILTED)
    require_quadrupole(sampled, TILTED)
    for wrong in (TILTED.inverse, UnimodularMetric(TILTED.stretch, -TILTED.angle), UnimodularMetric(0.67, 0.3)):
        with pytest.raises(AssertionError):
            require_quadrupole(sampled, wrong)
