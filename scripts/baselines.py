"""What one would write without kernels: Metropolis moves of the Laughlin state on the torus in NumPy, and with emcee.

The pair factor is the theta series, |theta_1(pi z/L1 | tau)|^2 exp(-2 pi Im(tau) b^2), z = L1 (a + b tau). Moves are
those of the program: one electron in turn, uniform on a square, accepted with probability min(1, ratio of |Psi|^2).
"""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any

import numpy as np

Array = Any
_TERMS = 4


def log_pair_factor(a: Array, b: Array, tau: complex) -> Array:
    """log |s|^2 at separations a + b tau, folded to |b| <= 1/2; four terms are exact to rounding for Im(tau) > 0.8."""
    b = b - np.rint(b)
    odd = 2.0 * np.arange(_TERMS) + 1.0
    series = (-1.0) ** np.arange(_TERMS) * np.exp(1j * np.pi * tau * odd**2 / 4.0)
    theta = np.sin(np.pi * odd * (a + b * tau)[..., None]) @ series
    return 2.0 * np.log(np.abs(theta)) - 2.0 * np.pi * tau.imag * b * b


def log_weight(exponent: int, positions: Array, tau: complex) -> Array:
    """log |Psi|^2 of positions of shape (..., n_electrons, 2) without the factor of the centre of mass."""
    i, j = np.triu_indices(positions.shape[-2], 1)
    between = positions[..., i, :] - positions[..., j, :]
    return exponent * log_pair_factor(between[..., 0], between[..., 1], tau).sum(axis=-1)


def _sweep(positions: Array, exponent: int, tau: complex, side: float, step: float, rng: np.random.Generator) -> int:
    """Every electron once in every walker, shape (n_walkers, n_electrons, 2); returns the number accepted."""
    n_walkers, n, _ = positions.shape
    accepted = 0
    for i in range(n):
        xy = step * (rng.random((n_walkers, 2)) - 0.5) / side
        shift_b = xy[:, 1] / tau.imag
        new = positions[:, i] + np.stack([xy[:, 0] - shift_b * tau.real, shift_b], axis=-1)
        others = np.delete(positions, i, axis=1)
        old_to, new_to = positions[:, None, i] - others, new[:, None] - others
        old, proposed = (log_pair_factor(to[..., 0], to[..., 1], tau).sum(axis=1) for to in (old_to, new_to))
        moved = np.log(rng.random(n_walkers)) < exponent * (proposed - old)
        positions[moved, i] = new[moved] - np.rint(new[moved])
        accepted += int(moved.sum())
    return accepted


def numpy_moves_per_second(
    exponent: int, n: int, tau: complex, side: float, step: float, n_walkers: int, seconds: float
) -> tuple[float, float]:
    """Moves per processor second, and acceptance, of ``n_walkers`` walkers side by side."""
    rng = np.random.default_rng(1)
    positions = rng.random((n_walkers, n, 2)) - 0.5
    for _ in range(2 if n_walkers > 1 else 20):
        _sweep(positions, exponent, tau, side, step, rng)
    sweeps, accepted, started = 0, 0, time.thread_time()
    while time.thread_time() - started < seconds:
        accepted += _sweep(positions, exponent, tau, side, step, rng)
        sweeps += 1
    moves = sweeps * n * n_walkers
    return moves / (time.thread_time() - started), accepted / moves


def emcee_traces(
    exponent: int, start: Array, tau: complex, n_steps: int, thin: int, energy: Callable[[Array], Array]
) -> tuple[Array, float]:
    """Energies of an ensemble of walkers on the 2 n coordinates, shape (n_steps/thin, n_walkers).

    ``start`` of shape (n_walkers, n_electrons, 2) should come from the state itself: from elsewhere the ensemble does
    not find the liquid within thousands of steps. Positions are kept in one cell, or it would spread for ever. Also the
    processor seconds per step of the whole ensemble, without those of the energies.
    """
    import emcee

    n_walkers, n, _ = start.shape

    def log_probability(coordinates: Array) -> Array:
        weight = log_weight(exponent, coordinates.reshape(len(coordinates), n, 2), tau)
        return np.where(np.abs(coordinates).max(axis=1) <= 0.5, weight, -np.inf)

    sampler = emcee.EnsembleSampler(n_walkers, 2 * n, log_probability, vectorize=True)
    started = time.thread_time()
    sampler.run_mcmc(start.reshape(n_walkers, 2 * n), n_steps)
    seconds = (time.thread_time() - started) / n_steps
    return np.array([energy(x.reshape(-1, n, 2)) for x in sampler.get_chain(thin=thin)]), seconds
