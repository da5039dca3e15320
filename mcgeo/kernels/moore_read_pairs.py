"""Pair factors of the Moore-Read state on the torus from stored phases, eight walkers at a time.

With z = L1 (a + b tau), v = pi z / L1, w = exp(2 i v), q = exp(i pi tau) and, for a pair, r = w_i/w_j and c = r + 1/r,
the theta series (DLMF 20.2.1-4) are, since sin((2k+1)v)/sin v, cos((2k+1)v)/cos v and cos 2kv are polynomials in
c = 2 cos 2v,

    theta_1 ~ (w_i - w_j) D(c) / sqrt(w_i w_j),    theta_2 ~ (w_i + w_j) N_2(c) / sqrt(w_i w_j),
    theta_3 = N_3(c),    theta_4 = N_4(c).

The terms of the series fall as |q|^(k^2), so that polynomials of degree at most 4 are exact to rounding for every
pair of positions in a reduced cell, without folding. Hence the Jastrow factor and the entry of the Pfaffian matrix come
from one pass of multiplications and one division per pair.

Periodicity. Under v -> v + pi and v -> v + pi tau the ratio theta_a/theta_1 changes by a sign that does not depend on
the other electron (DLMF 20.2.6-9): a row of the Pfaffian matrix and hence Pf changes by that sign, |Pf|^2 not at all.
The Jastrow factor is the periodic |s|^2 = |theta_1|^2 exp(-2 pi Im(tau) (b_i - b_j)^2). So |Pf|^2 times the product of
|s|^(2m) is doubly periodic in every electron. The centre-of-mass factor that restores the magnetic boundary conditions
of Psi itself is left out: under a common shift of all electrons only it changes, and its average over the cell does not
depend on the relative coordinates, so it decouples from every translation-invariant quantity.

In the sectors theta_3 and theta_4 only the modulus of the factors sqrt(w_i) of row i and column i is kept in the
matrix: |Pf|^2 needs no more, and rows stay of like size.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.elementary import cosine_sine_of_turns, exponential, split_exponent
from mcgeo.kernels.lanes import load, splat, splat_bits, store

_SERIES_TOLERANCE = 1e-15
# log |(w_i - w_j) D(c)|^2 is at most 2 pi Im(tau) + 3; a product of pairs is split before the sum of these is larger.
_BLOCK_RANGE = 500.0
_LARGEST_BLOCK = 16
LARGEST_IMAGINARY_TAU = 28.0


class MooreReadTorusTables(NamedTuple):
    """Constants of one cell and sector: made by `moore_read_torus_tables`, read by the kernels.

    ``denominator`` and ``numerator`` hold the coefficients of D(c) and N_a(c) as rows (real, imaginary), highest power
    first. ``half_phases`` is 1 for the sectors whose matrix has factors sqrt|w|, 0 for theta_2.
    """

    exponent: int
    half_phases: int
    tau_real: float
    tau_imag: float
    side: float
    block: int
    denominator: np.ndarray
    numerator: np.ndarray


def _degree(nome: float, first_omitted: list[int]) -> int:
    """Smallest degree d >= 1 for which |q|^first_omitted[d] is below the tolerance."""
    return next(d for d in range(1, len(first_omitted)) if nome ** first_omitted[d] < _SERIES_TOLERANCE)


def _powers_of_turns(degree: int) -> list[np.ndarray]:
    """r^k + 1/r^k as polynomials in c, lowest power first, k = 0 ... ``degree``."""
    powers = [np.array([2.0]), np.array([0.0, 1.0])]
    for k in range(2, degree + 1):
        powers.append(np.pad(powers[k - 1], (1, 0)) - np.pad(powers[k - 2], (0, 2)))
    return [np.pad(p, (0, degree + 1 - len(p))) for p in powers[: degree + 1]]


def _theta_polynomial(index: int, nome: complex) -> np.ndarray:
    """D or N_a, lowest power first.

    With |c| up to |q|^-2 the term of order k is |q|^(k^2 - k) of the first for theta_1 and theta_2, |q|^((k - 1)^2) of
    the largest for theta_3 and theta_4.
    """
    orders = range(12)
    if index in (1, 2):
        degree = _degree(abs(nome), [d * (d + 1) for d in orders])
        powers = _powers_of_turns(degree)
        sign = 1.0 if index == 1 else -1.0
        ratio = np.zeros(degree + 1, dtype=complex)
        total = ratio.copy()
        for k in range(degree + 1):
            # sin((2k+1)v)/sin v = 1 + sum_l (r^l + r^-l), cos((2k+1)v)/cos v = (-1)^k (1 + sum_l (-1)^l (r^l + r^-l))
            ratio += (sign**k) * powers[k] * (0.5 if k == 0 else 1.0)
            total += (-sign) ** k * sign**k * nome ** (k * (k + 1)) * ratio
        return total
    degree = _degree(abs(nome), [d * d for d in orders])
    powers = _powers_of_turns(degree)
    sign = 1.0 if index == 3 else -1.0
    return np.asarray(0.5 * powers[0] + sum(sign**k * nome ** (k * k) * powers[k] for k in range(1, degree + 1)))


def _as_rows(polynomial: np.ndarray) -> np.ndarray:
    return np.ascontiguousarray(np.stack([polynomial.real, polynomial.imag], axis=1)[::-1])


def moore_read_torus_tables(exponent: int, sector: int, tau: complex, side: float) -> MooreReadTorusTables:
    """Constants for exponent m, sector 1, 2, 3 (theta_2, theta_3, theta_4), reduced tau and |L1| in l_B."""
    nome = complex(np.exp(1j * math.pi * tau))
    block = int(_BLOCK_RANGE / (2.0 * math.pi * tau.imag + 3.0))
    return MooreReadTorusTables(
        exponent, int(sector != 1), tau.real, tau.imag, side, max(1, min(_LARGEST_BLOCK, block)),
        _as_rows(_theta_polynomial(1, nome)), _as_rows(_theta_polynomial(sector + 1, nome)),
    )  # fmt: skip


@kernel
def _polynomial(coefficients: np.ndarray, cr: Any, ci: Any) -> Any:
    pr, pi = splat(coefficients[0, 0]), splat(coefficients[0, 1])
    for k in range(1, coefficients.shape[0]):
        pr, pi = pr * cr - pi * ci + coefficients[k, 0], pr * ci + pi * cr + coefficients[k, 1]
    return pr, pi


@kernel
def position_factors(tables: Any, a: Any, b: Any) -> Any:
    """w = exp(2 pi i (a + b tau)) as (real, imaginary), and the scale sqrt|w| (1 for theta_2) of its row."""
    cosine, sine = cosine_sine_of_turns(a + b * tables.tau_real)
    modulus = exponential(b * (-2.0 * math.pi * tables.tau_imag))
    scale = exponential(b * (-math.pi * tables.tau_imag * tables.half_phases))
    return modulus * cosine, modulus * sine, scale


@kernel
def store_factors(factors: np.ndarray, j: int, wr: Any, wi: Any, scale: Any) -> None:
    """Write w, 1/w (real, imaginary) and the scale of electron ``j`` to rows 5j ... 5j + 4."""
    inverse_sq = 1.0 / (wr * wr + wi * wi)
    store(factors, 5 * j, wr)
    store(factors, 5 * j + 1, wi)
    store(factors, 5 * j + 2, wr * inverse_sq)
    store(factors, 5 * j + 3, wi * inverse_sq * (-1.0))
    store(factors, 5 * j + 4, scale)


@kernel
def load_factors(factors: np.ndarray, j: int) -> Any:
    """w (real, imaginary) and the scale of electron ``j``."""
    return load(factors, 5 * j), load(factors, 5 * j + 1), load(factors, 5 * j + 4)


@kernel
def pair_row(
    tables: Any, factors: np.ndarray, skipped: int, stop: int, wr: Any, wi: Any, scale: Any,
    column: np.ndarray, row: np.ndarray,
) -> Any:  # fmt: skip
    """Row of the Pfaffian matrix for an electron with the given w and scale, and two products made of it.

    Parameters
    ----------
    factors : ndarray, shape (5 n_electrons, 8)
        As written by `store_factors`.
    skipped, stop : int
        Electrons 0 ... stop - 1 except ``skipped`` are the others.
    column : ndarray, shape (2 n_electrons, 8)
        Real and imaginary parts of the vector.
    row : ndarray, shape (2 n_electrons, 8)
        Written, except at ``skipped``.

    Returns
    -------
    real, imaginary part of row.column; mantissa and binary exponent of prod_j |(w - w_j) D(c_j)|^2
    """
    inverse_sq = 1.0 / (wr * wr + wi * wi)
    vr, vi = wr * inverse_sq, wi * inverse_sq * (-1.0)
    total_r, total_i = splat(0.0), splat(0.0)
    mantissa, exponent = splat(1.0), splat_bits(0)
    in_block = 0
    for j in range(stop):
        if j == skipped:
            continue
        xr, xi = load(factors, 5 * j), load(factors, 5 * j + 1)
        yr, yi = load(factors, 5 * j + 2), load(factors, 5 * j + 3)
        cr = wr * yr - wi * yi + vr * xr - vi * xi
        ci = wr * yi + wi * yr + vr * xi + vi * xr
        pr, pi = _polynomial(tables.denominator, cr, ci)
        er, ei = wr - xr, wi - xi
        dr, di = er * pr - ei * pi, er * pi + ei * pr
        nr, ni = _polynomial(tables.numerator, cr, ci)
        if tables.half_phases == 0:
            er, ei = wr + xr, wi + xi
            nr, ni = er * nr - ei * ni, er * ni + ei * nr
        size = dr * dr + di * di
        ratio = scale * load(factors, 5 * j + 4) / size
        ar, ai = (nr * dr + ni * di) * ratio, (ni * dr - nr * di) * ratio
        store(row, 2 * j, ar)
        store(row, 2 * j + 1, ai)
        br, bi = load(column, 2 * j), load(column, 2 * j + 1)
        total_r = total_r + ar * br - ai * bi
        total_i = total_i + ar * bi + ai * br
        mantissa = mantissa * size
        in_block += 1
        if in_block == tables.block:
            mantissa, shift = split_exponent(mantissa)
            exponent = exponent + shift
            in_block = 0
    mantissa, shift = split_exponent(mantissa)
    return total_r, total_i, mantissa, exponent + shift
