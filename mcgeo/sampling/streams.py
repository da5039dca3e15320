"""Random streams, addressed and not handed on: results do not depend on threads, workers or their order."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def walker_sequence(seed: int, walker: int, component: int = 0) -> np.random.SeedSequence:
    """Seed sequence of one walker of one component of a liquid."""
    return np.random.SeedSequence(seed, spawn_key=(component, walker))


def generator_words(sequence: np.random.SeedSequence) -> NDArray[np.uint64]:
    """The four words that start a walker's generator inside the kernels, shape (4,)."""
    return np.asarray(sequence.generate_state(4, dtype=np.uint64), dtype=np.uint64)


def start_generator(sequence: np.random.SeedSequence) -> np.random.Generator:
    """Generator for a walker's first positions, independent of the stream of its moves."""
    return np.random.Generator(np.random.PCG64(sequence.spawn(1)[0]))
