"""Elementary functions and random numbers on eight lanes, free of branches and of calls into a library.

The exponential and the trigonometric pair are Taylor polynomials after an exact reduction of the argument; both are
good to two units in the last place over the ranges stated. The generator is xoshiro256++ of Blackman and Vigna,
ACM Trans. Math. Softw. 47, 36 (2021), one state per lane.
"""

from __future__ import annotations

import math
from typing import Any

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.lanes import (
    bits_from_float,
    float_from_bits,
    float_from_integer,
    integer_from_float,
    round_to_integer,
    select,
    shift_left,
    shift_right,
    splat,
    splat_bits,
)

_LOG2_E = 1.0 / math.log(2.0)
# ln 2 in two parts; the first has its last 21 bits clear, so its products with small integers are exact.
_LN2_HIGH = 6.93147180369123816490e-01
_LN2_LOW = 1.90821492927058770002e-10
_EXPONENT_LIMIT = 700.0
_MANTISSA_MASK = 0x000FFFFFFFFFFFFF
_EXPONENT_OF_ONE = 0x3FF0000000000000


@kernel
def exponential(x: Any) -> Any:
    """exp(x) per lane; x is held to [-700, 700], where neither end over- nor underflows."""
    x = select(x < splat(-_EXPONENT_LIMIT), splat(-_EXPONENT_LIMIT), x)
    x = select(x > splat(_EXPONENT_LIMIT), splat(_EXPONENT_LIMIT), x)
    k = round_to_integer(x * _LOG2_E)
    r = (x - k * _LN2_HIGH) - k * _LN2_LOW
    p = splat(1.0 / 6227020800.0)
    p = p * r + 1.0 / 479001600.0
    p = p * r + 1.0 / 39916800.0
    p = p * r + 1.0 / 3628800.0
    p = p * r + 1.0 / 362880.0
    p = p * r + 1.0 / 40320.0
    p = p * r + 1.0 / 5040.0
    p = p * r + 1.0 / 720.0
    p = p * r + 1.0 / 120.0
    p = p * r + 1.0 / 24.0
    p = p * r + 1.0 / 6.0
    p = p * r + 0.5
    p = p * r + 1.0
    p = p * r + 1.0
    power_of_two = shift_left(integer_from_float(k) + splat_bits(1023), 52)
    return p * float_from_bits(power_of_two)


@kernel
def cosine_sine_of_turns(turns: Any) -> Any:
    """(cos 2 pi t, sin 2 pi t) per lane for |t| below 2^40."""
    half_turns = round_to_integer(turns * 2.0)
    u = (turns - half_turns * 0.5) * (2.0 * math.pi)
    v = u * u
    # |u| <= pi/2; the first omitted terms are u^25/25! and u^24/24!, below 1e-19.
    s = splat(-1.0 / 25852016738884976640000.0)
    s = s * v + 1.0 / 51090942171709440000.0
    s = s * v - 1.0 / 121645100408832000.0
    s = s * v + 1.0 / 355687428096000.0
    s = s * v - 1.0 / 1307674368000.0
    s = s * v + 1.0 / 6227020800.0
    s = s * v - 1.0 / 39916800.0
    s = s * v + 1.0 / 362880.0
    s = s * v - 1.0 / 5040.0
    s = s * v + 1.0 / 120.0
    s = s * v - 1.0 / 6.0
    s = s * v + 1.0
    c = splat(-1.0 / 1124000727777607680000.0)
    c = c * v + 1.0 / 2432902008176640000.0
    c = c * v - 1.0 / 6402373705728000.0
    c = c * v + 1.0 / 20922789888000.0
    c = c * v - 1.0 / 87178291200.0
    c = c * v + 1.0 / 479001600.0
    c = c * v - 1.0 / 3628800.0
    c = c * v + 1.0 / 40320.0
    c = c * v - 1.0 / 720.0
    c = c * v + 1.0 / 24.0
    c = c * v - 0.5
    c = c * v + 1.0
    # An odd number of half turns flips both signs: move its last bit into the sign bit.
    flip = shift_left(integer_from_float(half_turns), 63)
    cosine = float_from_bits(bits_from_float(c) ^ flip)
    sine = float_from_bits(bits_from_float(s * u) ^ flip)
    return cosine, sine


@kernel
def split_exponent(x: Any) -> Any:
    """Mantissa in [1, 2) and binary exponent (as integer lanes) of a positive x.

    Zero comes back as 2^-1023: small enough to be refused by any acceptance test, and no NaN.
    """
    bits = bits_from_float(x)
    exponent = shift_right(bits, 52) - splat_bits(1023)
    mantissa = float_from_bits((bits & splat_bits(_MANTISSA_MASK)) | splat_bits(_EXPONENT_OF_ONE))
    return mantissa, exponent


@kernel
def next_uniform(s0: Any, s1: Any, s2: Any, s3: Any) -> Any:
    """One uniform number in [0, 1) per lane with 53 random bits, and the four words of the advanced generator."""
    total = s0 + s3
    result = (shift_left(total, 23) | shift_right(total, 41)) + s0
    shifted = shift_left(s1, 17)
    s2 = s2 ^ s0
    s3 = s3 ^ s1
    s1 = s1 ^ s2
    s0 = s0 ^ s3
    s2 = s2 ^ shifted
    s3 = shift_left(s3, 45) | shift_right(s3, 19)
    uniform = float_from_integer(shift_right(result, 11)) * (1.0 / 9007199254740992.0)
    return uniform, s0, s1, s2, s3

