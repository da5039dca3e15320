"""Bounded least squares under rules against the best of all sets of bounds."""

import itertools

import numpy as np
import pytest

from mcgeo.estimate.bounded_fit import BoundedFit


def problem(seed, largest=np.inf, n=6):
    random = np.random.default_rng(seed)
    basis = random.normal(size=(30, n))
    # Some unknowns want to be negative, some above 0.3.
    data = basis @ random.normal(0.2, 0.3, n)
    rules = np.stack([np.ones(n), np.arange(n)])
    penalty = np.diff(np.eye(n), 2, axis=0)
    fit = BoundedFit(basis, random.uniform(1.0, 3.0, 30), penalty, rules, np.array([1.0, 0.45 * n]), largest)
    return fit, data


def cost(fit, data, c):
    return float(np.sum((fit.weight * (fit.basis @ c - data)) ** 2) + np.sum((fit.penalty @ c) ** 2))


def best_of_all(fit, data):
    """The least cost among the solutions for every choice of bounds in force that obey all of them."""
    n = fit.basis.shape[1]
    rows = np.concatenate([fit.basis * fit.weight[:, None], fit.penalty])
    right = np.concatenate([data * fit.weight, np.zeros(len(fit.penalty))])
    choices = [np.nan, 0.0, fit.largest] if np.isfinite(fit.largest) else [np.nan, 0.0]
    found = []
    for bounds in itertools.product(choices, repeat=n):
        held = np.array(bounds)
        free = np.isnan(held)
        if free.sum() < 2:
            continue
        start = np.where(free, 0.0, held)
        x, a = rows[:, free], fit.rules[:, free]
        system = np.block([[x.T @ x, a.T], [a, np.zeros((2, 2))]])
        inhomogeneous = np.concatenate([x.T @ (right - rows @ start), fit.values - fit.rules @ start])
        start[free] = np.linalg.solve(system, inhomogeneous)[: free.sum()]
        if start.min() > -1e-9 and start.max() < fit.largest + 1e-9:
            found.append(start)
    return min(found, key=lambda c: cost(fit, data, c))


@pytest.mark.parametrize("largest", [np.inf, 0.4])
@pytest.mark.parametrize("seed", range(4))
def test_minimum(seed, largest):
    fit, data = problem(seed, largest)
    found = fit.linear_fit(data).of(data)
    np.testing.assert_allclose(fit.rules @ found, fit.values, rtol=1e-12)
    assert found.min() > -1e-12 and found.max() < largest + 1e-12
    assert found.min() < 1e-12
    np.testing.assert_allclose(found, best_of_all(fit, data), atol=1e-9)


def test_samples_are_mapped_linearly():
    fit, data = problem(1)
    linear = fit.linear_fit(data)
    random = np.random.default_rng(9)
    samples = data + 0.1 * random.normal(size=(5, 30))
    mapped = linear.of(samples)
    np.testing.assert_allclose(mapped.mean(axis=0), linear.of(samples.mean(axis=0)), atol=1e-14)
    np.testing.assert_allclose(mapped @ fit.rules.T, np.tile(fit.values, (5, 1)), rtol=1e-12)


def test_rules_that_leave_no_choice():
    # As many as there are places, at most one each: all are taken.
    random = np.random.default_rng(3)
    rules = np.stack([np.ones(6), np.arange(6)])
    fit = BoundedFit(random.normal(size=(20, 6)), np.ones(20), np.zeros((0, 6)), rules, np.array([6.0, 15.0]), 1.0)
    data = random.normal(size=(4, 20))
    np.testing.assert_allclose(fit.linear_fit(data[0]).of(data), 1.0, atol=1e-9)
    # One unknown and two rules that agree.
    rules = np.array([[1.0], [3.0]])
    single = BoundedFit(np.ones((3, 1)), np.ones(3), np.zeros((0, 1)), rules, np.array([1.0, 3.0]), 1.0)
    np.testing.assert_allclose(single.linear_fit(np.zeros(3)).of(np.zeros((2, 3))), 1.0, atol=1e-12)
