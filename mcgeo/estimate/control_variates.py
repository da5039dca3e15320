"""Control variates: block means cleared of the noise they share with quantities of mean exactly zero.

For any block mean X and controls c with <c> = 0, X - beta.c has the mean of X, and with
beta = Cov(c, c)^-1 Cov(c, X) the smallest variance (Owen, Monte Carlo theory, methods and examples (2013), section
8.9). A beta fitted to the blocks that it is applied to follows their noise: errors then come out too small. Here
it is cross-fitted: walkers are dealt into folds, and the blocks of a fold are cleared with the beta of the others.
Walkers are independent, so the result stays unbiased whatever beta is, and the scatter of cleared blocks holds the
noise of beta as their mean does.

beta is linear in X: clearing S(q) wave by wave clears every linear function of S(q) in the same way.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri, stdtr

Array = NDArray[np.float64]

USED, FEW_BLOCKS, NOT_ZERO = "used", "few_blocks", "not_zero"

LARGEST_Z = 5.0
_FOLDS = 16
# Blocks outside a fold per control: with ten the noise of beta adds a tenth to the variance that is left. Of n blocks
# no more than sqrt(n) controls are used: cleared blocks of two folds are correlated by tr(M M)/n^2, M = <c c^T e> with
# controls of unit variance and e the part of X they do not explain, and the scatter of blocks does not show that.
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
    """Regression of block means on controls of mean zero, cross-fitted.

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
    n_used = min(controls.shape[2], outside // _BLOCKS_PER_CONTROL, math.isqrt(outside))
    if n_used == 0:
        return Cleared(blocks, z, FEW_BLOCKS)
    controls = controls[..., :n_used]
    flat = blocks.reshape(n_blocks, n_walkers, -1)
    # In units of their overall scatter, so that a control that is quiet outside a fold gets no large coefficient.
    scaled = controls / controls.std(axis=(0, 1))
    left = np.empty_like(flat)
    for label in range(int(fold.max()) + 1):
        inside = fold == label
        left[inside] = flat[inside] - scaled[inside] @ _coefficients(scaled[~inside], flat[~inside])
    return Cleared(left.reshape(blocks.shape), z, USED)


def _coefficients(controls: Array, values: Array) -> Array:
    """beta, shape (n_controls, n_values), by ridge regression with a free constant."""
    design = controls - controls.mean(axis=0)
    normal = design.T @ design / len(design) + _RIDGE * np.eye(design.shape[1])
    return np.asarray(np.linalg.solve(normal, design.T @ (values - values.mean(axis=0)) / len(design)))
