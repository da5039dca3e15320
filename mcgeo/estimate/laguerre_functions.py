"""Laguerre functions of high degree, of which polynomial and exponential by themselves leave the range of numbers."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

_LARGE = 1e150


def laguerre_functions(largest: int, x: Array) -> Array:
    """L_l(x) exp(-x/2) for l = 0 ... ``largest`` and x >= 0 of shape (n,): shape (largest + 1, n).

    Forward recurrence (DLMF 18.9.1), stable up to the turning point x = 4 l and falling beyond it. Values are carried
    relative to a power of ten that follows them.
    """
    out = np.empty((largest + 1, len(x)))
    before, value, log_scale = np.zeros_like(x), np.ones_like(x), -0.5 * x
    for degree in range(largest + 1):
        out[degree] = value * np.exp(log_scale)
        before, value = value, ((2 * degree + 1 - x) * value - degree * before) / (degree + 1)
        large = np.abs(value) > _LARGE
        if np.any(large):
            value, before = np.where(large, value / _LARGE, value), np.where(large, before / _LARGE, before)
            log_scale = np.where(large, log_scale + math.log(_LARGE), log_scale)
    return out
