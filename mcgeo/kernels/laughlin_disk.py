"""Metropolis moves of the Laughlin droplet in the plane, eight walkers at a time.

|Psi|^2 = prod_{i<j} |z_i - z_j|^(2m) exp(-sum_i |z_i|^2 / 2), lengths in l_B (Laughlin, Phys. Rev. Lett. 50, 1395
(1983)). A move needs the product of the squared distances from one electron to all others before and after: per pair
two differences, two squares and one factor. Products are taken in blocks; after a block the binary exponent is
split off and carried as an integer, so that no number of electrons overflows.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.elementary import exponential, next_uniform, split_exponent
from mcgeo.kernels.lanes import (
    LANES,
    float_from_bits,
    float_from_integer,
    integer_from_float,
    load,
    round_to_integer,
    select,
    shift_left,
    splat,
    splat_bits,
    store,
)

# Electrons per block: 56 squared distances times a mantissa below 2 stay below 2^1023 up to distances of 500 l_B.
_BLOCK = 56
_UNROLLED = 4
_LARGEST_POWER = 1000.0
_LN_2 = math.log(2.0)
_LOG2_E = 1.0 / _LN_2


@kernel
def _distance_sq(x: np.ndarray, y: np.ndarray, j: int, px: Any, py: Any) -> Any:
    dx, dy = px - load(x, j), py - load(y, j)
    return dx * dx + dy * dy


@kernel
def distance_product(x: np.ndarray, y: np.ndarray, n_others: int, px: Any, py: Any) -> Any:
    """Product over electrons 0..n_others-1 of |z_j - z|^2, as mantissa in [1, 2) and binary exponent.

    Parameters
    ----------
    x, y : ndarray, shape (n_electrons, 8)
        Positions in l_B.
    px, py : lanes
        Where the electron is or would be.
    """
    mantissa, exponent = splat(1.0), splat_bits(0)
    j = 0
    while j < n_others:
        stop = min(j + _BLOCK, n_others)
        # Four at a time: a single chain of products would wait for every multiplication to end.
        while j + _UNROLLED <= stop:
            first = _distance_sq(x, y, j, px, py) * _distance_sq(x, y, j + 1, px, py)
            second = _distance_sq(x, y, j + 2, px, py) * _distance_sq(x, y, j + 3, px, py)
            mantissa = mantissa * (first * second)
            j += _UNROLLED
        while j < stop:
            mantissa = mantissa * _distance_sq(x, y, j, px, py)
            j += 1
        mantissa, shift = split_exponent(mantissa)
        exponent = exponent + shift
    return mantissa, exponent


@kernel
def _two_distance_products(x: np.ndarray, y: np.ndarray, n_others: int, px: Any, py: Any, qx: Any, qy: Any) -> Any:
    """`distance_product` of two points at once: positions are loaded once and two chains of products overlap."""
    first, first_exponent = splat(1.0), splat_bits(0)
    second, second_exponent = splat(1.0), splat_bits(0)
    j = 0
    while j < n_others:
        stop = min(j + _BLOCK, n_others)
        while j + 2 <= stop:
            near = _distance_sq(x, y, j, px, py) * _distance_sq(x, y, j + 1, px, py)
            far = _distance_sq(x, y, j, qx, qy) * _distance_sq(x, y, j + 1, qx, qy)
            first, second = first * near, second * far
            j += 2
        if j < stop:
            first = first * _distance_sq(x, y, j, px, py)
            second = second * _distance_sq(x, y, j, qx, qy)
            j += 1
        first, shift = split_exponent(first)
        first_exponent = first_exponent + shift
        second, shift = split_exponent(second)
        second_exponent = second_exponent + shift
    return first, first_exponent, second, second_exponent


@kernel
def power_of_two(k: Any) -> Any:
    """2^k per lane for integers k (as floats) held to [-1000, 1000]."""
    k = select(k < splat(-_LARGEST_POWER), splat(-_LARGEST_POWER), k)
    k = select(k > splat(_LARGEST_POWER), splat(_LARGEST_POWER), k)
    return float_from_bits(shift_left(integer_from_float(k) + splat_bits(1023), 52))


@kernel
def gaussian_ratio(px: Any, py: Any, dx: Any, dy: Any) -> Any:
    """exp(-(|z + dz|^2 - |z|^2) / 2) as a factor near 1 and a power of two (as a float)."""
    # From the difference, not from two squares: nothing cancels far from the centre.
    fall = (dx * (px * 2.0 + dx) + dy * (py * 2.0 + dy)) * 0.5
    power = round_to_integer(fall * -_LOG2_E)
    return exponential((power * _LN_2 + fall) * -1.0), power


@kernel
def propose(step: float, s0: Any, s1: Any, s2: Any, s3: Any) -> Any:
    """Displacement uniform on a square of side ``step``, the number that decides, and the advanced generators."""
    ux, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
    uy, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
    u, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
    return (ux - 0.5) * step, (uy - 0.5) * step, u, s0, s1, s2, s3


@kernel
def accepts(
    exponent: int, left: Any, near: Any, power: Any, right: Any, right_power: Any, new_near: Any, new_power: Any
) -> Any:
    """left (near 2^power)^m < right 2^right_power (new_near 2^new_power)^m; only ``right_power`` is a float."""
    right = right * power_of_two(float_from_integer(new_power - power) * exponent + right_power)
    for _factor in range(exponent):
        left = left * near
        right = right * new_near
    return left < right


@kernel
def swap_rows(array: np.ndarray, first: int, second: int) -> None:
    held = load(array, first)
    store(array, first, load(array, second))
    store(array, second, held)


@kernel
def advance(
    exponent: int,
    x: np.ndarray,
    y: np.ndarray,
    words: np.ndarray,
    accepted: np.ndarray,
    step: float,
    n_sweeps: int,
    n_hits: int,
) -> None:
    """``n_sweeps`` sweeps of a group of eight walkers: every electron gets ``n_hits`` proposals in turn per sweep.

    A proposal is uniform on a square of side ``step`` (l_B). The electron visited is swapped into the last place, so
    that the loop over the others is contiguous; electrons are alike, so their order carries nothing.

    Parameters
    ----------
    exponent : int
        m.
    x, y : ndarray, shape (n_electrons, 8)
        Positions in l_B; updated.
    words : ndarray of uint64, shape (4, 8)
        The lanes' generators; updated.
    accepted : ndarray, shape (1, 8)
        Incremented by the number of accepted proposals.
    """
    last = x.shape[0] - 1
    s0, s1, s2, s3 = load(words, 0), load(words, 1), load(words, 2), load(words, 3)
    n_accepted = load(accepted, 0)
    for _ in range(n_sweeps):
        for i in range(last + 1):
            swap_rows(x, i, last)
            swap_rows(y, i, last)
            px, py = load(x, last), load(y, last)
            dx, dy, u, s0, s1, s2, s3 = propose(step, s0, s1, s2, s3)
            new_x, new_y = px + dx, py + dy
            # The exponential comes before the products, to be worked on while they run.
            gauss, gauss_power = gaussian_ratio(px, py, dx, dy)
            near, power, new_near, new_power = _two_distance_products(x, y, last, px, py, new_x, new_y)
            for hit in range(n_hits):
                accept = accepts(exponent, u, near, power, gauss, gauss_power, new_near, new_power)
                px, py = select(accept, new_x, px), select(accept, new_y, py)
                near, power = select(accept, new_near, near), select(accept, new_power, power)
                n_accepted = n_accepted + select(accept, splat(1.0), splat(0.0))
                if hit + 1 < n_hits:
                    dx, dy, u, s0, s1, s2, s3 = propose(step, s0, s1, s2, s3)
                    new_x, new_y = px + dx, py + dy
                    gauss, gauss_power = gaussian_ratio(px, py, dx, dy)
                    new_near, new_power = distance_product(x, y, last, new_x, new_y)
            store(x, last, px)
            store(y, last, py)
    store(accepted, 0, n_accepted)
    store(words, 0, s0)
    store(words, 1, s1)
    store(words, 2, s2)
    store(words, 3, s3)


@kernel
def log_weights(exponent: int, x: np.ndarray, y: np.ndarray, out: np.ndarray) -> None:
    """log |Psi|^2 of each walker, recomputed from the positions alone.

    Parameters
    ----------
    x, y : ndarray, shape (n_electrons, 8)
    out : ndarray, shape (8,)
        Written.
    """
    product = np.empty((2, LANES))
    out[:] = 0.0
    for i in range(x.shape[0]):
        near, power = distance_product(x, y, i, load(x, i), load(y, i))
        store(product, 0, near)
        store(product, 1, float_from_integer(power))
        for lane in range(LANES):
            out[lane] += exponent * (math.log(product[0, lane]) + product[1, lane] * _LN_2)
            out[lane] -= 0.5 * (x[i, lane] ** 2 + y[i, lane] ** 2)
