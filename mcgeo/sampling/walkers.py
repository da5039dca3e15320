"""A set of walkers in groups of eight, advanced by threads."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from mcgeo.kernels.lanes import LANES, aligned_copy
from mcgeo.sampling.streams import generator_words, start_generator, walker_sequence
from mcgeo.states.base import SampledState, WalkerGroup

Array = NDArray[np.float64]
Result = TypeVar("Result")


@dataclass(frozen=True)
class WalkerArrays:
    """All that is needed to continue a set of walkers.

    Attributes
    ----------
    a, b : ndarray, shape (n_groups, n_electrons, 8)
    words : ndarray of uint64, shape (n_groups, 4, 8)
    """

    a: Array
    b: Array
    words: NDArray[np.uint64]


def start_walkers(state: SampledState, n_walkers: int, seed: int, component: int = 0) -> WalkerArrays:
    """Walkers where the state starts them, one stream each; the last group is filled up with walkers not counted."""
    n_groups = -(-n_walkers // LANES)
    a = np.empty((n_groups, state.n_electrons, LANES))
    b = np.empty_like(a)
    words = np.empty((n_groups, 4, LANES), dtype=np.uint64)
    for walker in range(n_groups * LANES):
        group, lane = divmod(walker, LANES)
        sequence = walker_sequence(seed, walker, component)
        words[group, :, lane] = generator_words(sequence)
        a[group, :, lane], b[group, :, lane] = state.start(start_generator(sequence))
    return WalkerArrays(a, b, words)


def groups_of(state: SampledState, arrays: WalkerArrays) -> list[WalkerGroup]:
    """Groups at copies of the arrays."""
    return [
        state.group(aligned_copy(a), aligned_copy(b), aligned_copy(words))
        for a, b, words in zip(arrays.a, arrays.b, arrays.words, strict=True)
    ]


def arrays_of(groups: Sequence[WalkerGroup]) -> WalkerArrays:
    """Copies of what is needed to continue."""
    return WalkerArrays(
        np.stack([group.a for group in groups]),
        np.stack([group.b for group in groups]),
        np.stack([group.words for group in groups]),
    )


def for_each_group(
    action: Callable[[WalkerGroup], Result], groups: Sequence[WalkerGroup], threads: int
) -> list[Result]:
    """Results of ``action`` on every group, in order; kernels release the lock, so threads run side by side."""
    if threads == 1 or len(groups) == 1:
        return [action(group) for group in groups]
    with ThreadPoolExecutor(max_workers=min(threads, len(groups))) as pool:
        return list(pool.map(action, groups))
