"""The walkers against an independent sampler, and their errors against known correlations."""

from __future__ import annotations

import math
import threading

import emcee
import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import chi2

from mcgeo.estimate.statistics import (
    Estimate,
    independent_samples,
    integrated_autocorrelation_time,
    mean_estimate,
)
from mcgeo.estimate.torus_energy import torus_energy
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.frame import TorusFrame
from mcgeo.problem.interaction import Coulomb
from mcgeo.runs.liquid import Liquid
from mcgeo.sampling.chain import Schedule, equilibrated, next_block
from mcgeo.sampling.measurement import STRUCTURE, torus_measurement
from mcgeo.states.laughlin import Laughlin
from tests.physics.autoregressive import autoregressive
from tests.physics.checks import LEAST_PROBABILITY, Sampler, require_unit_pulls

Array = NDArray[np.float64]

TAU = complex(0.3, 1.1)
ELECTRONS = 3
WAVES = [(1, 0), (0, 1), (1, 1), (1, -1), (2, 0), (2, 1), (1, 2), (2, -1)]


def log_weight(fractions: Array, exponent: float) -> Array:
    """m (log |theta_1(pi z|tau)|^2 - 2 pi Im(tau) b^2) over pairs, z = a + b tau, shape (n,).

    theta_1 by its sine series, DLMF 20.2.1. ``fractions``, shape (n, 2N), are a, b of each electron in turn.
    """
    a, b = fractions[:, 0::2], fractions[:, 1::2]
    first, second = np.triu_indices(a.shape[1], 1)
    a, b = a[:, first] - a[:, second], b[:, first] - b[:, second]
    a, b = a - np.rint(a), b - np.rint(b)
    n = np.arange(6)
    nome = np.exp(1j * math.pi * TAU * (n + 0.5) ** 2) * (-1.0) ** n
    theta = (np.sin((2 * n + 1) * math.pi * (a + b * TAU)[..., None]) * nome).sum(axis=-1)
    return np.asarray(exponent * (2.0 * np.log(np.abs(theta)) - 2.0 * math.pi * TAU.imag * b**2).sum(axis=1))


def structure_by_emcee(exponent: float) -> Array:
    """S(q) of each of 400 independent emcee walkers, shape (400, n_waves)."""
    n_walkers, n_steps, n_dimensions = 400, 1500, 2 * ELECTRONS
    moves = emcee.moves.GaussianMove(0.25**2 * np.ones(n_dimensions), mode="random")
    ensemble = emcee.EnsembleSampler(
        n_walkers, n_dimensions, log_weight, args=(exponent,), moves=moves, vectorize=True
    )
    start = np.random.default_rng(7).random((n_walkers, n_dimensions))
    ensemble.random_state = np.random.RandomState(8).get_state()
    state = ensemble.run_mcmc(start, 200)
    ensemble.reset()
    ensemble.run_mcmc(state, n_steps, thin_by=1)
    chain = ensemble.get_chain(thin=5)
    phase = np.tensordot(chain[..., 0::2], np.array(WAVES)[:, 0], 0)
    phase = phase + np.tensordot(chain[..., 1::2], np.array(WAVES)[:, 1], 0)
    density = np.exp(2j * math.pi * phase).sum(axis=2)
    return np.asarray((np.abs(density) ** 2 / ELECTRONS).mean(axis=0))


def measured_structure(liquid: Liquid) -> Array:
    """S(q) of the liquid on the waves of `WAVES` (the cell is reduced already, so the basis is the same)."""
    integers = liquid.frame.waves(liquid.q_max).integers.tolist()
    return liquid.structure_samples[:, [integers.index(list(wave)) for wave in WAVES]]


def difference_probability(one: Array, other: Array) -> float:
    """Chance of means as far apart as these or farther, correlations between waves taken along."""
    difference = one.mean(axis=0) - other.mean(axis=0)
    covariance = np.cov(one.T) / len(one) + np.cov(other.T) / len(other)
    return float(chi2.sf(difference @ np.linalg.solve(covariance, difference), len(difference)))


def test_walkers_against_emcee(sampled: Sampler) -> None:
    measured = measured_structure(sampled(3, ELECTRONS, tau=TAU, sweeps=16000, seed=71))
    expected = structure_by_emcee(3.0)
    assert difference_probability(measured, expected) > LEAST_PROBABILITY
    # One energy from all the waves: a Gaussian interaction, so that these waves carry it.
    cell = Cell.from_tau(TAU, 3 * ELECTRONS)
    q = np.array(WAVES) @ (2.0 * math.pi * np.linalg.inv(cell.vectors).T)
    weights = 2.0 * math.pi * np.exp(-0.5 * np.sum(q**2, axis=1)) / cell.area
    one, other = (mean_estimate(samples @ weights) for samples in (measured, expected))
    require_unit_pulls([(one.value - other.value) / math.hypot(one.error, other.error)])


def test_emcee_tells_a_slightly_wrong_exponent(sampled: Sampler) -> None:
    measured = measured_structure(sampled(3, ELECTRONS, tau=TAU, sweeps=16000, seed=71))
    assert difference_probability(measured, structure_by_emcee(2.85)) < LEAST_PROBABILITY


@pytest.mark.parametrize("a", [0.0, 0.5, 0.9, 0.97])
def test_autocorrelation_time_in_closed_form(a: float) -> None:
    series = autoregressive(np.random.default_rng(11), a, (32, 4000))
    exact = (1.0 + a) / (1.0 - a)
    found = integrated_autocorrelation_time(series)
    # Variance of the estimate with a window of five times: Sokal (1996), equation 3.19.
    error = exact * math.sqrt(2.0 * (10.0 * exact + 1.0) / series.size)
    require_unit_pulls([(found - exact) / error])
    if a <= 0.9:
        # Each chain's own mean, which emcee takes off, costs a part tau/4000.
        by_emcee = emcee.autocorr.integrated_time(series.T[:, :, None], c=5, quiet=True)[0]
        assert found == pytest.approx(by_emcee, rel=0.07)


def test_autocorrelation_time_of_a_chain(sampled: Sampler) -> None:
    # A short step makes neighbouring configurations alike.
    liquid = sampled(3, 4, shape="square", sweeps=8000, seed=73, measure_every=1, step=1.2)
    trace = np.moveaxis(liquid.blocks.trace[0], 1, 0).reshape(liquid.schedule.n_walkers, -1)
    by_emcee = emcee.autocorr.integrated_time(trace.T[:, :, None], c=5, quiet=True)[0]
    assert liquid.autocorrelation_time == pytest.approx(by_emcee, rel=0.05)
    tuned = sampled(3, 4, shape="square", sweeps=8000, seed=73, measure_every=1)
    assert liquid.autocorrelation_time > 3.0 * tuned.autocorrelation_time


def autoregressive_blocks(a: float, per_block: int, n_runs: int) -> list[Array]:
    """Block means, shape (8, 64), of runs of 64 autoregressive chains."""
    rng = np.random.default_rng(2)
    runs = [autoregressive(rng, a, (64, 8 * per_block)) for _ in range(n_runs)]
    return [run.reshape(64, 8, per_block).mean(axis=2).T for run in runs]


@pytest.mark.parametrize(("a", "per_block"), [(0.9, 200), (0.9, 40), (0.9, 5), (0.5, 10)])
def test_errors_of_correlated_blocks_are_calibrated(a: float, per_block: int) -> None:
    time = (1.0 + a) / (1.0 - a)
    runs = autoregressive_blocks(a, per_block, 200)
    estimates = [mean_estimate(independent_samples(blocks, per_block / time)) for blocks in runs]
    require_unit_pulls([estimate.value / estimate.error for estimate in estimates])


def test_blocks_wrongly_taken_for_independent_are_seen() -> None:
    estimates = [mean_estimate(independent_samples(x, 100.0)) for x in autoregressive_blocks(0.9, 5, 200)]
    with pytest.raises(AssertionError):
        require_unit_pulls([estimate.value / estimate.error for estimate in estimates])


def exact_pull(value: float, error: float) -> float:
    """Against Laughlin 1/3, six electrons, hexagonal cell: exact diagonalisation not of this package."""
    return (value + 0.4113987749) / error


def test_slow_chains_have_honest_errors(sampled: Sampler) -> None:
    energies = [sampled(3, 6, seed=80 + run, step=1.0).torus_energy(Coulomb()) for run in range(8)]
    require_unit_pulls([exact_pull(energy.value, energy.error) for energy in energies])


@pytest.mark.parametrize(("exponent", "electrons"), [(1, 16), (3, 8), (3, 20), (5, 12), (2, 16)])
def test_tuning_reaches_its_acceptance(sampled: Sampler, exponent: int, electrons: int) -> None:
    liquid = sampled(exponent, electrons, seed=90)
    assert 0.35 < liquid.diagnostics.acceptance < 0.40
    assert 0.0 < liquid.chains[0].step < liquid.frame.isotropic.side


def energy_with_tables(**changes: float) -> Estimate:
    """Torus energy of six electrons whose kernel reads changed tables."""
    frame = TorusFrame.of(Cell.from_shape("hexagonal", 18))
    state = Laughlin(3, 6, frame)
    object.__setattr__(state, "_tables", state._tables._replace(**changes))
    energy = torus_energy(frame, 8.0, Coulomb())
    measurement = torus_measurement(state, frame.waves(8.0), energy.weights)
    schedule = Schedule(32, 4, 250, 4, 400, None, 5, 1)
    chain, means = equilibrated(state, schedule, threading.Event()), []
    for _ in range(schedule.n_blocks):
        chain, record = next_block(state, measurement, schedule, chain, threading.Event())
        means.append(energy.of(record.means[STRUCTURE]))
    return mean_estimate(np.concatenate(means))


def test_right_tables_give_the_exact_energy() -> None:
    energy = energy_with_tables()
    require_unit_pulls([exact_pull(energy.value, energy.error)])


@pytest.mark.parametrize(
    "changes",
    [
        {"exponent": 2},
        {"exponent": 4},
        # The nearest images at half their weight, and none.
        {"nome_sq_real": -0.5 * math.exp(-math.sqrt(3.0) * math.pi)},
        {"nome_sq_real": -1e-6},
    ],
)
def test_wrong_tables_are_seen(changes: dict[str, float]) -> None:
    energy = energy_with_tables(**changes)
    with pytest.raises(AssertionError):
        require_unit_pulls([exact_pull(energy.value, energy.error)])
