"""Errors of means by blocking, and whether they have reached their plateau.

Flyvbjerg and Petersen, J. Chem. Phys. 91, 461 (1989): neighbours are averaged in pairs again and again; the error that
follows from the scatter of blocks taken as independent rises with their length until they are (equations 27 and 28 of
the paper, numbers from memory). Several chains are blocked side by side and share their mean.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import fdtrc

Array = NDArray[np.float64]

# A longer block whose error is larger at these odds denies the plateau.
_LEAST_PROBABILITY = 1e-4


@dataclass(frozen=True)
class Blocking:
    """The plateau.

    Attributes
    ----------
    error : float
        Standard error of the mean; without a plateau that of the longest blocks, a lower bound.
    error_error : float
        Its own standard error, error/sqrt(2 (n - 1)) for n blocks.
    block : float
        Steps in a block.
    reached : bool
        True when blocks of this length are long enough and no longer ones give a larger error.
    """

    error: float
    error_error: float
    block: float
    reached: bool


def blocking(chains: Array) -> Blocking:
    """Plateau of the error of the mean over chains of shape (n_chains, n_steps).

    The plateau starts at the first block length B with B^3 > 2 n (error_B/error_1)^4, n the number of values (Wolff,
    Comput. Phys. Commun. 156, 143 (2004), equation 47; Lee, Mella and Rappe, J. Chem. Phys. 134, 244112 (2011)):
    systematic and statistical error of the error are then equal. The longest blocks are whole chains: chains that
    disagree have no plateau.
    """
    level, length = chains - chains.mean(), 1
    squares, counts, lengths = [], [], []

    def note(blocks: Array, steps: int) -> None:
        if blocks.size > 1:
            # A remainder too short for a pair is left out: what is used has this part of the steps.
            used = blocks.size * steps / chains.size
            squares.append(float(blocks.var()) / (blocks.size - 1) * used)
            counts.append(blocks.size)
            lengths.append(float(steps))

    while level.shape[1] > 1:
        note(level, length)
        even = level.shape[1] // 2 * 2
        level, length = 0.5 * (level[:, 0:even:2] + level[:, 1:even:2]), 2 * length
    note(chains.mean(axis=1), chains.shape[1])
    if not squares or not squares[0] > 0.0:
        return Blocking(math.nan, math.nan, math.nan, False)
    square, count, block = np.array(squares), np.array(counts), np.array(lengths)
    enough = np.flatnonzero(block**3 > 2.0 * chains.size * (square / square[0]) ** 2)
    chosen = int(enough[0]) if len(enough) else len(square) - 1
    longer = fdtrc(count[chosen:] - 1, count[chosen] - 1, square[chosen:] / square[chosen])
    reached = len(enough) > 0 and bool(np.all(longer > _LEAST_PROBABILITY))
    if not reached:
        chosen = len(square) - 1
    error = math.sqrt(square[chosen])
    return Blocking(error, error / math.sqrt(2.0 * (count[chosen] - 1)), float(block[chosen]), reached)
