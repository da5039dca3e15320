"""xoshiro256++ in plain integers: Blackman and Vigna, ACM Trans. Math. Softw. 47, 36 (2021)."""

from __future__ import annotations

from collections.abc import Iterator

_MASK = 2**64 - 1


def _rotated(x: int, places: int) -> int:
    return ((x << places) | (x >> (64 - places))) & _MASK


def xoshiro(words: list[int]) -> Iterator[tuple[int, tuple[int, ...]]]:
    """Outputs of 64 bits from four words on, each with the state after it."""
    s = list(words)
    while True:
        result = (_rotated((s[0] + s[3]) & _MASK, 23) + s[0]) & _MASK
        t = (s[1] << 17) & _MASK
        s[2] ^= s[0]
        s[3] ^= s[1]
        s[1] ^= s[2]
        s[0] ^= s[3]
        s[2] ^= t
        s[3] = _rotated(s[3], 45)
        yield result, tuple(s)


def uniforms(words: list[int]) -> Iterator[float]:
    """Numbers in [0, 1) from the upper 53 bits; Python divides integers exactly."""
    for result, _ in xoshiro(words):
        yield (result >> 11) / 2**53
