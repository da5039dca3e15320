"""Metropolis moves of the Laughlin state on the torus, eight walkers at a time, from stored phases.

With z = L1 (a + b tau), w = exp(2 pi i (a + b tau)) and q = exp(i pi tau), the pair factor of two electrons is

    |s|^2 ~ |w_i - w_j|^2 |w_j - q^2 w_i|^2 |w_i - q^2 w_j|^2 |w_i|^-3 |w_j|^-3
            x exp(-2 pi Im(tau) (b_i - b_j)^2) x far images,

the product form of theta_1 (Whittaker and Watson, A Course of Modern Analysis, section 21.3; DLMF 20.5.1) with its
first three factors written out. The far images of all electrons at once follow from power sums P_k = sum_j w_j^k and
Q_k = sum_j w_j^-k:

    log far = -2 Re sum_k q^4k / (k (1 - q^2k)) (w^k Q_k + w^-k P_k).

|Psi|^2 is the product of |s|^(2m) over pairs. The centre-of-mass factor is left out: under a common shift of
all electrons only it changes, and its average over the cell does not depend on the relative coordinates, so it
decouples from every translation-invariant quantity.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np

from mcgeo.kernels._jit import inlined_kernel, kernel, lean_kernel
from mcgeo.kernels.elementary import (
    cosine_sine_of_turns,
    exponential,
    next_uniform,
    split_exponent,
)
from mcgeo.kernels.lanes import (
    LANES,
    float_from_integer,
    load,
    round_to_integer,
    select,
    splat,
    splat_bits,
    store,
)

# The product of one block of electrons must stay inside the range of a float for every position in the cell:
# its logarithm is bounded by 6 pi Im(tau) per electron, so 28 / Im(tau) electrons keep it below 530 of 708.
_BLOCK_RANGE = 28.0
_LARGEST_BLOCK = 24
LARGEST_IMAGINARY_TAU = _BLOCK_RANGE


class LaughlinTorusTables(NamedTuple):
    """Constants of one cell: made by `laughlin_torus_tables`, read by the kernels.

    ``far`` holds -q^4k / (k (1 - q^2k)) as rows (real, imaginary), shape (n_powers, 2).
    """

    exponent: int
    tau_real: float
    tau_imag: float
    side: float
    nome_sq_real: float
    nome_sq_imag: float
    block: int
    far: np.ndarray


def laughlin_torus_tables(exponent: int, tau: complex, side: float) -> LaughlinTorusTables:
    """Constants for exponent m, modulus tau (in the fundamental domain) and side |L1| in l_B.

    The number of power sums is chosen so that the first one left out is below 1e-15.
    """
    nome_sq = np.exp(2j * math.pi * tau)
    n_powers = max(1, math.ceil(34.5 / (2.0 * math.pi * tau.imag)) - 1)
    k = np.arange(1, n_powers + 1)
    far = -(nome_sq ** (2 * k)) / (k * (1.0 - nome_sq**k))
    block = max(1, min(_LARGEST_BLOCK, int(_BLOCK_RANGE / tau.imag)))
    return LaughlinTorusTables(
        exponent, tau.real, tau.imag, side, nome_sq.real, nome_sq.imag, block,
        np.ascontiguousarray(np.stack([far.real, far.imag], axis=1)),
    )  # fmt: skip


@inlined_kernel
def _phase(tables: Any, a: Any, b: Any) -> Any:
    """w = exp(2 pi i (a + b tau)) as (real, imaginary)."""
    cosine, sine = cosine_sine_of_turns(a + b * tables.tau_real)
    modulus = exponential(b * (-2.0 * math.pi * tables.tau_imag))
    return modulus * cosine, modulus * sine


@lean_kernel
def refresh_phases(tables: Any, a: np.ndarray, b: np.ndarray, phases: np.ndarray, sums: np.ndarray) -> None:
    """Phases and power sums from the positions.

    Parameters
    ----------
    a, b : ndarray, shape (n_electrons, 8)
        Positions in units of the cell's vectors, in [-1/2, 1/2].
    phases : ndarray, shape (2 n_electrons, 8)
        Written: rows 2j and 2j+1 hold the real and imaginary part of w_j.
    sums : ndarray, shape (4 n_powers + 1, 8)
        Written: for each k the real and imaginary parts of P_k and Q_k; the last row is the sum of b.
    """
    n_powers = tables.far.shape[0]
    sums[:] = 0.0
    for j in range(a.shape[0]):
        wr, wi = _phase(tables, load(a, j), load(b, j))
        store(phases, 2 * j, wr)
        store(phases, 2 * j + 1, wi)
        _add_powers(n_powers, sums, wr, wi, 1.0)
        store(sums, 4 * n_powers, load(sums, 4 * n_powers) + load(b, j))


@inlined_kernel
def _add_powers(n_powers: int, sums: np.ndarray, wr: Any, wi: Any, sign: float) -> None:
    """Add ``sign`` times the powers w^k and w^-k to the sums."""
    scale = 1.0 / (wr * wr + wi * wi)
    vr, vi = wr * scale, wi * scale * (-1.0)
    pr, pi, qr, qi = wr, wi, vr, vi
    for k in range(n_powers):
        store(sums, 4 * k, load(sums, 4 * k) + pr * sign)
        store(sums, 4 * k + 1, load(sums, 4 * k + 1) + pi * sign)
        store(sums, 4 * k + 2, load(sums, 4 * k + 2) + qr * sign)
        store(sums, 4 * k + 3, load(sums, 4 * k + 3) + qi * sign)
        pr, pi = pr * wr - pi * wi, pr * wi + pi * wr
        qr, qi = qr * vr - qi * vi, qr * vi + qi * vr


@inlined_kernel
def _one_body_part(tables: Any, sums: np.ndarray, n_others: int, b: Any, wr: Any, wi: Any) -> Any:
    """All of log |s|^2 summed over the others (whose sums are given) but the three near products."""
    n_powers = tables.far.shape[0]
    scale = 1.0 / (wr * wr + wi * wi)
    vr, vi = wr * scale, wi * scale * (-1.0)
    pr, pi, qr, qi = wr, wi, vr, vi
    total = splat(0.0)
    for k in range(n_powers):
        # Re[c_k (w^k Q_k + w^-k P_k)]
        sum_pr, sum_pi = load(sums, 4 * k), load(sums, 4 * k + 1)
        sum_qr, sum_qi = load(sums, 4 * k + 2), load(sums, 4 * k + 3)
        real = pr * sum_qr - pi * sum_qi + qr * sum_pr - qi * sum_pi
        imag = pr * sum_qi + pi * sum_qr + qr * sum_pi + qi * sum_pr
        total = total + (real * tables.far[k, 0] - imag * tables.far[k, 1])
        pr, pi = pr * wr - pi * wi, pr * wi + pi * wr
        qr, qi = qr * vr - qi * vi, qr * vi + qi * vr
    sum_b = load(sums, 4 * n_powers)
    quadratic = b * (3.0 * n_others) - b * b * (1.0 * n_others) + b * sum_b * 2.0
    return total * 2.0 + quadratic * (2.0 * math.pi * tables.tau_imag)


@inlined_kernel
def _images(tables: Any, wr: Any, wi: Any) -> Any:
    """w, q^2 w and |q|^2 w / q^2 as six numbers."""
    cr, ci = tables.nome_sq_real, tables.nome_sq_imag
    scale = 1.0 / math.sqrt(cr * cr + ci * ci)
    return (
        wr, wi, wr * cr - wi * ci, wr * ci + wi * cr,
        (wr * cr + wi * ci) * scale, (wi * cr - wr * ci) * scale,
    )  # fmt: skip


@inlined_kernel
def _near_factors(modulus: float, xr: Any, xi: Any, images: Any) -> Any:
    """|x - w|^2, and |x - q^2 w|^2 times |q^2 x - w|^2 = | |q|^2 x - |q|^2 w / q^2 |^2."""
    wr, wi, inner_r, inner_i, outer_r, outer_i = images
    dr, di = xr - wr, xi - wi
    er, ei = xr - inner_r, xi - inner_i
    fr, fi = xr * modulus - outer_r, xi * modulus - outer_i
    return dr * dr + di * di, (er * er + ei * ei) * (fr * fr + fi * fi)


@inlined_kernel
def _gathered(near: Any, far: Any, mantissa: Any, exponent: Any) -> Any:
    """Mantissa and exponent times the products of one block."""
    near, shift_near = split_exponent(near)
    far, shift_far = split_exponent(far)
    mantissa, shift = split_exponent(mantissa * (near * far))
    return mantissa, exponent + shift + (shift_near + shift_far)


@inlined_kernel
def _near_products(tables: Any, phases: np.ndarray, n_others: int, wr: Any, wi: Any) -> Any:
    """Product over electrons 0..n_others-1 of the three near factors, as mantissa and binary exponent."""
    images = _images(tables, wr, wi)
    modulus = math.sqrt(tables.nome_sq_real**2 + tables.nome_sq_imag**2)
    mantissa, exponent = splat(1.0), splat_bits(0)
    n_blocks = (n_others + tables.block - 1) // tables.block
    for block in range(n_blocks):
        near, far = splat(1.0), splat(1.0)
        for j in range(block * n_others // n_blocks, (block + 1) * n_others // n_blocks):
            factor, far_factor = _near_factors(modulus, load(phases, 2 * j), load(phases, 2 * j + 1), images)
            near, far = near * factor, far * far_factor
        mantissa, exponent = _gathered(near, far, mantissa, exponent)
    return mantissa, exponent


@inlined_kernel
def _swap_rows(array: np.ndarray, first: int, second: int) -> None:
    held = load(array, first)
    store(array, first, load(array, second))
    store(array, second, held)


@lean_kernel
def advance(
    tables: Any,
    a: np.ndarray,
    b: np.ndarray,
    phases: np.ndarray,
    sums: np.ndarray,
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
    a, b, phases, sums
        As in `refresh_phases`; updated.
    words : ndarray of uint64, shape (4, 8)
        The lanes' generators; updated.
    accepted : ndarray, shape (1, 8)
        Incremented by the number of accepted proposals.
    """
    last = a.shape[0] - 1
    n_powers = tables.far.shape[0]
    s0, s1, s2, s3 = load(words, 0), load(words, 1), load(words, 2), load(words, 3)
    to_b = step / (tables.side * tables.tau_imag)
    to_a = step / tables.side
    exponent = 1.0 * tables.exponent
    n_accepted = load(accepted, 0)
    for _ in range(n_sweeps):
        for i in range(last + 1):
            _swap_rows(a, i, last)
            _swap_rows(b, i, last)
            _swap_rows(phases, 2 * i, 2 * last)
            _swap_rows(phases, 2 * i + 1, 2 * last + 1)
            xa, xb = load(a, last), load(b, last)
            wr, wi = load(phases, 2 * last), load(phases, 2 * last + 1)
            _add_powers(n_powers, sums, wr, wi, -1.0)
            store(sums, 4 * n_powers, load(sums, 4 * n_powers) - xb)
            near, power = _near_products(tables, phases, last, wr, wi)
            rest = _one_body_part(tables, sums, last, xb, wr, wi)
            for _hit in range(n_hits):
                ux, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
                uy, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
                u, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
                shift_b = (uy - 0.5) * to_b
                new_b = xb + shift_b
                new_a = xa + (ux - 0.5) * to_a - shift_b * tables.tau_real
                new_b = new_b - round_to_integer(new_b)
                new_a = new_a - round_to_integer(new_a)
                new_wr, new_wi = _phase(tables, new_a, new_b)
                new_near, new_power = _near_products(tables, phases, last, new_wr, new_wi)
                new_rest = _one_body_part(tables, sums, last, new_b, new_wr, new_wi)
                gain = float_from_integer(new_power - power) * math.log(2.0) + (new_rest - rest)
                left, right = u, exponential(gain * exponent)
                for _factor in range(tables.exponent):
                    left = left * near
                    right = right * new_near
                accept = left < right
                xa, xb = select(accept, new_a, xa), select(accept, new_b, xb)
                wr, wi = select(accept, new_wr, wr), select(accept, new_wi, wi)
                near, rest = select(accept, new_near, near), select(accept, new_rest, rest)
                power = select(accept, new_power, power)
                n_accepted = n_accepted + select(accept, splat(1.0), splat(0.0))
            store(a, last, xa)
            store(b, last, xb)
            store(phases, 2 * last, wr)
            store(phases, 2 * last + 1, wi)
            _add_powers(n_powers, sums, wr, wi, 1.0)
            store(sums, 4 * n_powers, load(sums, 4 * n_powers) + xb)
    store(accepted, 0, n_accepted)
    store(words, 0, s0)
    store(words, 1, s1)
    store(words, 2, s2)
    store(words, 3, s3)


@kernel
def log_weights(tables: Any, a: np.ndarray, b: np.ndarray, out: np.ndarray) -> None:
    """log |Psi|^2 of each walker, up to one constant of the cell, recomputed from the positions alone.

    Parameters
    ----------
    a, b : ndarray, shape (n_electrons, 8)
    out : ndarray, shape (8,)
        Written.
    """
    n = a.shape[0]
    phases = np.empty((2 * n, LANES))
    sums = np.empty((4 * tables.far.shape[0] + 1, LANES))
    total = np.empty((3, LANES))
    out[:] = 0.0
    for i in range(1, n):
        refresh_phases(tables, a[:i], b[:i], phases, sums)
        xb = load(b, i)
        wr, wi = _phase(tables, load(a, i), xb)
        near, power = _near_products(tables, phases, i, wr, wi)
        store(total, 0, near)
        store(total, 1, float_from_integer(power))
        store(total, 2, _one_body_part(tables, sums, i, xb, wr, wi))
        # What depends on the others alone: 3 log 1/|w_j| and -b_j^2.
        constant = 2.0 * math.pi * tables.tau_imag
        for lane in range(LANES):
            others = 0.0
            for j in range(i):
                others += 3.0 * b[j, lane] - b[j, lane] ** 2
            out[lane] += tables.exponent * (
                math.log(total[0, lane]) + total[1, lane] * math.log(2.0) + total[2, lane] + constant * others
            )
