"""A look at every block: numbers that are none must not be averaged, and walkers at them must not be kept."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import NumericalError
from mcgeo.sampling.blocks import BlockRecord
from mcgeo.sampling.walkers import WalkerArrays


def require_sound_walkers(walkers: WalkerArrays, n_walkers: int, when: str) -> None:
    """Refuse positions that are not finite, and generators that stand still: xoshiro never leaves the zero state.

    Raises
    ------
    NumericalError
        Naming the walker and ``when`` it was found.
    """
    for positions in (walkers.a, walkers.b):
        finite = np.isfinite(positions).all(axis=1).reshape(-1)[:n_walkers]
        _require(finite, "is at positions that are no numbers", when)
    _require(walkers.words.any(axis=1).reshape(-1)[:n_walkers], "has a random generator that stands still", when)


def require_sound_block(record: BlockRecord, when: str) -> None:
    """Refuse measurements that are not finite.

    Raises
    ------
    NumericalError
        Naming the walker, what was measured, and ``when``.
    """
    for name, values in {**record.means, "energy": record.trace, "acceptance": record.accepted}.items():
        finite = np.isfinite(values).reshape(len(values), -1).all(axis=1)
        _require(finite, f"has a value of {name} that is no number", when)
    if not np.isfinite(record.drift):
        raise NumericalError(f"values kept between moves are no numbers {when}; {_PLEA}")


_PLEA = "this is a fault of the program: please report it with the configuration and what mcgeo info prints"


def _require(sound: NDArray[np.bool_], what: str, when: str) -> None:
    if not sound.all():
        walker = int(np.flatnonzero(~sound)[0]) + 1
        raise NumericalError(f"walker {walker} {what} {when}; {_PLEA}")
