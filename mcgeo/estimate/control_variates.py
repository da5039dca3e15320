"""Control variates: block means cleared of the noise they share with quantities of mean exactly zero.

For any block mean X and controls c with <c> = 0, X - beta.c has the mean of X, and with
beta = Cov(c, c)^-1 Cov(c, X) the smallest variance (Owen, Monte Carlo theory, methods and examples (2013), section
8.9). A beta fitted to the blocks that it is applied to follows their noise: the scatter of what is left is too
small, and blocks cleared with the beta of all other walkers share its noise, which their scatter does not show either.
Here the error is that of the jackknife: the mean t at c = 0 of the regression is found again without each walker (or
fold of walkers) f in turn, and the walker's blocks are shifted as a whole so that their mean is the pseudo-value

    p_f = (n/n_f) t - (n/n_f - 1) t_(without f)

(Tukey, Ann. Math. Stat. 29, 614 (1958); for folds of unequal size Busing, Meijer and van der Leeden, Stat. Comput. 9, 3
(1999), both from memory). The mean of pseudo-values is t without its bias of the order 1/n, and their scatter over
walkers holds what beta adds to the noise.

beta is linear in X: clearing S(q) wave by wave clears every linear function of S(q) in the same way.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri, stdtr

Array = NDArray[np.float64]

USED, FEW_BLOCKS, NOT_ZERO = "used", "few_blocks", "not_zero"

LARGEST_Z = 5.0
# A fold is a walker, or several of more walkers than this.
_FOLDS = 64
# Blocks outside a fold per control: with ten the noise of beta adds a tenth to the variance that is left.
_BLOCKS_PER_CONTROL = 10
# Added to the correlation matrix of the controls: bounds beta where neighbouring Gaussians are nearly the same control.
_RIDGE = 1e-8


@dataclass(frozen=True, eq=False)
class Cleared:
    """Block means after regression on controls.

    Attributes
    ----------
    blocks : ndarray, shape (n_blocks, n_walkers, ...)
        As given, unless ``verdict`` is ``used``.
    z : ndarray, shape (n_controls,)
        Means of the controls in standard errors, as normal deviates of equal tail probability.
    verdict : str
        ``used``; ``few_blocks``: too few for any; ``not_zero``: a control's mean is more than five errors from zero.
    """

    blocks: Array
    z: Array
    verdict: str


def control_z(samples: Array) -> Array:
    """Means of independent samples, shape (n_samples, n_controls), in standard errors.

    Student's t of few samples is turned into the normal deviate of the same tail probability.
    """
    n = len(samples)
    error = samples.std(axis=0, ddof=1) / np.sqrt(n)
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = samples.mean(axis=0) / error
    return np.asarray(-np.sign(ratio) * ndtri(stdtr(n - 1, -np.abs(ratio))))


def _fold_labels(n_blocks: int, n_walkers: int) -> NDArray[np.int64]:
    """Fold of every block, shape (n_blocks, n_walkers): whole walkers, or stretches of a lone walker's blocks."""
    if n_walkers == 1:
        n_folds = min(_FOLDS, n_blocks)
        return (np.arange(n_blocks) * n_folds // n_blocks)[:, None]
    return np.broadcast_to(np.arange(n_walkers) % min(_FOLDS, n_walkers), (n_blocks, n_walkers))


def cleared(blocks: Array, controls: Array, z: Array) -> Cleared:
    """Regression of block means on controls of mean zero, as pseudo-values of the jackknife over walkers.

    Parameters
    ----------
    blocks : ndarray, shape (n_blocks, n_walkers, ...)
    controls : ndarray, shape (n_blocks, n_walkers, n_controls)
        At the same configurations. Where blocks are too few for all of them the first ones are used.
    z : ndarray, shape (n_controls,)
        From `control_z`.
    """
    n_blocks, n_walkers, _ = controls.shape
    fold = _fold_labels(n_blocks, n_walkers)
    outside = fold.size - int(np.bincount(fold.ravel()).max())
    if not np.all(np.abs(z) <= LARGEST_Z):
        return Cleared(blocks, z, NOT_ZERO)
    n_used = min(controls.shape[2], outside // _BLOCKS_PER_CONTROL)
    if n_used == 0:
        return Cleared(blocks, z, FEW_BLOCKS)
    flat = blocks.reshape(fold.size, -1)
    # In units of their overall scatter, so that a control that is quiet outside a fold gets no large coefficient.
    scaled = (controls / controls.std(axis=(0, 1)))[..., :n_used].reshape(fold.size, -1)
    return Cleared(_pseudo_values(flat, scaled, fold.ravel()).reshape(blocks.shape), z, USED)


def _pseudo_values(values: Array, controls: Array, fold: NDArray[np.int64]) -> Array:
    """Cleared blocks, shape (n, n_values), every fold shifted to its pseudo-value."""
    n = len(values)
    design = np.concatenate([np.ones((n, 1)), controls], axis=1)
    members = [np.flatnonzero(fold == label) for label in range(int(fold.max()) + 1)]
    normal = np.array([design[inside].T @ design[inside] for inside in members])
    right = np.array([design[inside].T @ values[inside] for inside in members])
    all_normal, all_right = normal.sum(axis=0), right.sum(axis=0)
    mean = _solved(all_normal, all_right)[0]
    left = np.empty_like(values)
    for inside, own_normal, own_right in zip(members, normal, right, strict=True):
        without, *beta = _solved(all_normal - own_normal, all_right - own_right)
        ratio = n / len(inside)
        cleared_of_beta = values[inside] - controls[inside] @ np.array(beta)
        left[inside] = cleared_of_beta - cleared_of_beta.mean(axis=0) + ratio * mean - (ratio - 1.0) * without
    return left


def _solved(normal: Array, right: Array) -> Array:
    """Constant and coefficients, shape (1 + n_controls, n_values), by ridge regression."""
    ridge = np.full(len(normal), _RIDGE * normal[0, 0])
    ridge[0] = 0.0
    return np.asarray(np.linalg.solve(normal + np.diag(ridge), right))
