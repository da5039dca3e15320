"""The determinant of the composite-fermion sea on the torus, from stored phases.

With u = z / L1 = a + b tau, w = exp(2 pi i u), q = exp(i pi tau), theta(u) = theta_1(pi u | tau), occupied points
(p_a, s_a) of mean (p, s), and displacements t_a = [(p_a - p) + (s_a - s) tau] / N, the state is

    Psi = det M prod_{i<j} theta(u_i - u_j)^(m-2) F(U),
    M_ia = exp(-2 pi i s_a u_i) prod_{k != i} theta(u_i - u_k - t_a),

U = sum u_i (Rezayi and Read, Phys. Rev. Lett. 72, 900 (1994); Shao, Kim, Haldane and Rezayi, Phys. Rev. Lett. 114,
206402 (2015)).

Boundary conditions. theta(u + 1) = -theta(u) and theta(u + tau) = -exp(-i pi tau - 2 pi i u) theta(u). Taking u_i to
u_i + 1 multiplies row i by (-1)^(N-1) and the N - 1 other rows by -1: in all by 1. Taking it to u_i + tau multiplies

    row i       by  (-1)^(N-1) exp(-i pi tau (N-1) - 2 pi i (N u_i - U))  and  exp(2 pi i [(N-1) t_a - s_a tau]),
    row k != i  by  -exp(-i pi tau + 2 pi i (u_k - u_i))                  and  exp(-2 pi i t_a).

Up to a constant of the row the second factors are the same in all rows, exp(-2 pi i (p_a + s_a tau)/N), and come out of
the determinant column by column. In all, with P = N p, S = N s,

    det M -> exp(-2 pi i tau (N-1) - 4 pi i (N u_i - U) - 2 pi i (P + S tau)/N) det M:

what prod theta(u_i - u_j)^2 does, times a constant. So F is the centre-of-mass factor of the Laughlin state 1/m with
its argument moved by -(p + s tau)/m, which undoes that constant, and

    W = |det M|^2 prod_{i<j} |theta(u_i - u_j)|^(2(m-2))
        exp(-2 pi m Im(tau) sum_{i<j} (b_i - b_j)^2 - 4 pi s Im(tau) sum b_i)

is periodic in every electron. A common shift u_i + c gives |det M|^2 the factor |exp(-2 pi i S c)|^2, which the last
exponent takes back: W depends on relative coordinates only. |F|^2 with its Gaussian depends on U alone; averaged over
a common shift it is a constant, so it decouples from every translation-invariant quantity and is not sampled. Adding
one vector to all points changes neither t_a nor W.

Here theta is replaced by a modulus that is periodic but for t and has mean logarithm zero, which makes the Gaussians
part of the entries and keeps these near 1 at any N:

    theta(u - t)  ->  f(r) g(b),   r = exp(2 pi i (u - t)),   f(r) = (1 - r) sum_n (-1)^n q^(n(n+1)) (r^-n + ... + r^n),
    g(b) = exp(pi Im(tau) (b - b^2 - 1/6)).

f is theta_1 over i q^(1/4) r^(-1/2) (DLMF 20.2.1); the roots left out cancel between the rows up to a constant. The
series is a polynomial in r + 1/r: a few multiplications per entry and no transcendental function.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.determinant import lane_vectors, row_width
from mcgeo.kernels.elementary import exponential
from mcgeo.kernels.lanes import LANES, load, splat, store

# Products stay between exp(-300) and exp(300) in the elimination.
_LOG_RANGE = 300.0
_LOG_PRECISION = 38.0


class FermiSeaTables(NamedTuple):
    """Constants of one cell and sea: made by `fermi_sea_tables`, read by the kernels.

    Attributes
    ----------
    pair_exponent : int
        m - 2.
    mean_power : float
        Mean of ``powers``.
    symmetric : bool
        Whether column N-1-a is the mirror image of column a, t -> -t.
    powers : ndarray of int64, shape (n_electrons,)
        s_a up to a common integer.
    series : ndarray, shape (n_terms, 2)
        Coefficients of the polynomial in r + 1/r, from the constant, as (real, imaginary).
    shifts, mirrored : ndarray, shape (4 n_vectors, 8)
        Rows 4v..4v+3: real and imaginary parts of e and 1/e, e = exp(-2 pi i t_a) (mirrored: of 1/e and e) for the
        columns of vector v; the columns from N on repeat column 0.
    """

    n_electrons: int
    pair_exponent: int
    tau_real: float
    tau_imag: float
    side: float
    mean_power: float
    symmetric: bool
    powers: np.ndarray
    series: np.ndarray
    shifts: np.ndarray
    mirrored: np.ndarray


def largest_imaginary_tau(n_electrons: int, widest: float) -> float:
    """Largest Im(tau) at which no entry can leave the range of the elimination.

    |f g| is at most exp(pi Im(tau)/12) and |w^-s| at most exp(pi Im(tau) |s|), met twice.

    Parameters
    ----------
    widest : float
        Largest |s_a - s|.
    """
    return _LOG_RANGE / (math.pi * (n_electrons / 12.0 + 2.0 * (widest + 1.0)))


def _theta_series(tau: complex, reach: float) -> np.ndarray:
    """Polynomial coefficients of sum_n (-1)^n q^(n(n+1)) chi_n in x = r + 1/r for |b| < ``reach``.

    chi_n = r^-n + ... + r^n obeys chi_(n+1) = x chi_n - chi_(n-1). Term n is exp(-pi Im(tau) (n^2 + n - 2 n |b|)) at
    most.
    """
    n_terms = 2
    while math.pi * tau.imag * n_terms * (n_terms + 1.0 - 2.0 * reach) < _LOG_PRECISION:
        n_terms += 1
    total = np.zeros(n_terms, dtype=complex)
    before, chi = np.zeros(n_terms), np.zeros(n_terms)
    before[0], chi[0] = -1.0, 1.0
    for n in range(n_terms):
        total += (-1.0) ** n * np.exp(1j * math.pi * tau * n * (n + 1)) * chi
        before, chi = chi, np.concatenate([[0.0], chi[:-1]]) - before
    return np.stack([total.real, total.imag], axis=1)


def fermi_sea_tables(exponent: int, tau: complex, side: float, points: np.ndarray) -> FermiSeaTables:
    """Constants for exponent m, modulus tau (in the fundamental domain), side |L1| in l_B and points (p_a, s_a).

    Parameters
    ----------
    points : ndarray of int64, shape (n_electrons, 2)
        In lexicographic order, which makes mirror images of a symmetric sea meet in reverse order.
    """
    n = len(points)
    doubled = points + points[::-1]
    offset = points - points.mean(axis=0)
    displacement = (offset[:, 0] + offset[:, 1] * tau) / n
    columns = np.concatenate([displacement, np.full(LANES * lane_vectors(n) - n, displacement[0])])
    e = np.exp(-2j * math.pi * columns).reshape(-1, LANES)
    parts = [e.real, e.imag, (1.0 / e).real, (1.0 / e).imag]
    powers = points[:, 1] - round(points[:, 1].mean())
    return FermiSeaTables(
        n, exponent - 2, tau.real, tau.imag, side, float(powers.mean()), bool(np.all(doubled == doubled[0])),
        powers.astype(np.int64),
        _theta_series(tau, 1.0 + float(np.max(np.abs(offset[:, 1]))) / n),
        np.stack(parts, axis=1).reshape(-1, LANES),
        np.stack([parts[2], parts[3], parts[0], parts[1]], axis=1).reshape(-1, LANES),
    )  # fmt: skip


@kernel
def phase(tables: Any, a: float, b: float) -> Any:
    """w and 1/w as (real, imaginary, real, imaginary)."""
    angle = 2.0 * math.pi * (a + b * tables.tau_real)
    modulus = math.exp(-2.0 * math.pi * tables.tau_imag * b)
    cosine, sine = math.cos(angle), math.sin(angle)
    return modulus * cosine, modulus * sine, cosine / modulus, -sine / modulus


@kernel
def pair_constants(tables: Any, electrons: np.ndarray, point: Any, b: float, pairs: np.ndarray) -> None:
    """w_k / w, w / w_k and g(b_k - b) of every electron k against one point.

    Parameters
    ----------
    electrons : ndarray, shape (5 n_vectors, 8)
        Electrons along the lanes: real and imaginary parts of w, then of 1/w, then b, each in n_vectors rows.
    point : tuple
        As from `phase`.
    pairs : ndarray, shape (5 n_vectors, 8)
        Written: real and imaginary parts of w_k/w, then of w/w_k, then g.
    """
    n_vectors = lane_vectors(tables.n_electrons)
    wr, wi, vr, vi = point
    for v in range(n_vectors):
        xr, xi = load(electrons, v), load(electrons, n_vectors + v)
        yr, yi = load(electrons, 2 * n_vectors + v), load(electrons, 3 * n_vectors + v)
        separation = load(electrons, 4 * n_vectors + v) - b
        store(pairs, v, xr * vr - xi * vi)
        store(pairs, n_vectors + v, xr * vi + xi * vr)
        store(pairs, 2 * n_vectors + v, yr * wr - yi * wi)
        store(pairs, 3 * n_vectors + v, yr * wi + yi * wr)
        logarithm = (separation - separation * separation - 1.0 / 6.0) * (math.pi * tables.tau_imag)
        store(pairs, 4 * n_vectors + v, exponential(logarithm))


@kernel
def theta_factor(series: np.ndarray, rr: Any, ri: Any, vr: Any, vi: Any) -> Any:
    """f(r) from r and 1/r, lane by lane."""
    xr, xi = rr + vr, ri + vi
    top = series.shape[0] - 1
    pr, pi = splat(series[top, 0]), splat(series[top, 1])
    for n in range(top - 1, -1, -1):
        pr, pi = pr * xr - pi * xi + series[n, 0], pr * xi + pi * xr + series[n, 1]
    sr = 1.0 - rr
    return sr * pr + ri * pi, sr * pi - ri * pr


@kernel
def column_factors(tables: Any, shifts: np.ndarray, v: int, pairs: np.ndarray, factors: np.ndarray) -> None:
    """f g of every electron against the point of ``pairs`` for the eight columns of vector v.

    Parameters
    ----------
    shifts : ndarray
        ``tables.shifts`` or ``tables.mirrored``.
    factors : ndarray, shape (2 n_electrons, 8)
        Written: rows 2k and 2k+1 hold the real and imaginary part for electron k.
    """
    n_vectors = lane_vectors(tables.n_electrons)
    er, ei, fr, fi = load(shifts, 4 * v), load(shifts, 4 * v + 1), load(shifts, 4 * v + 2), load(shifts, 4 * v + 3)
    for k in range(tables.n_electrons):
        row, lane = k // LANES, k % LANES
        xr, xi = pairs[row, lane], pairs[n_vectors + row, lane]
        yr, yi = pairs[2 * n_vectors + row, lane], pairs[3 * n_vectors + row, lane]
        g = pairs[4 * n_vectors + row, lane]
        pr, pi = theta_factor(tables.series, er * xr - ei * xi, er * xi + ei * xr, fr * yr - fi * yi, fr * yi + fi * yr)
        store(factors, 2 * k, pr * g)
        store(factors, 2 * k + 1, pi * g)


@kernel
def row_product(
    tables: Any, shifts: np.ndarray, pairs: np.ndarray, skipped: int, factors: np.ndarray, product: np.ndarray
) -> None:
    """prod_{k != skipped} f g for every column.

    Parameters
    ----------
    shifts, factors
        As in `column_factors`.
    product : ndarray, shape (2 n_vectors, 8)
        Written: real, then imaginary parts.
    """
    n_vectors = lane_vectors(tables.n_electrons)
    for v in range(n_vectors):
        column_factors(tables, shifts, v, pairs, factors)
        pr, pi = splat(1.0), splat(0.0)
        for k in range(tables.n_electrons):
            if k != skipped:
                fr, fi = load(factors, 2 * k), load(factors, 2 * k + 1)
                pr, pi = pr * fr - pi * fi, pr * fi + pi * fr
        store(product, v, pr)
        store(product, n_vectors + v, pi)


@kernel
def fill_row(tables: Any, product: np.ndarray, reverse: bool, point: Any, i: int, matrix: np.ndarray) -> None:
    """Row i of the matrix: w_i^-s_a times the product over the others for column a.

    theta(u_i - u_k - t) = -theta(u_k - u_i + t): the product is that of the mirrored columns, read in reverse order
    where the sea is symmetric. Phases common to a row and constants of a column are left out.
    """
    n = tables.n_electrons
    n_vectors, start = lane_vectors(n), row_width(n) * i
    wr, wi, vr, vi = point
    for a in range(n):
        source = n - 1 - a if reverse else a
        row, lane = source // LANES, source % LANES
        xr, xi = product[row, lane], product[n_vectors + row, lane]
        power = tables.powers[a]
        br, bi = (vr, vi) if power > 0 else (wr, wi)
        for _ in range(abs(power)):
            xr, xi = xr * br - xi * bi, xr * bi + xi * br
        matrix[start + a // LANES, a % LANES] = xr
        matrix[start + n_vectors + a // LANES, a % LANES] = xi


@kernel
def log_pair_product(tables: Any, pairs: np.ndarray, first: int, skipped: int) -> float:
    """sum log |f g| at t = 0 of the electrons from ``first`` on but ``skipped`` against the point of ``pairs``."""
    n = tables.n_electrons
    n_vectors = lane_vectors(n)
    moduli = np.empty((n_vectors, LANES))
    for v in range(n_vectors):
        fr, fi = theta_factor(
            tables.series, load(pairs, v), load(pairs, n_vectors + v),
            load(pairs, 2 * n_vectors + v), load(pairs, 3 * n_vectors + v),
        )  # fmt: skip
        g = load(pairs, 4 * n_vectors + v)
        store(moduli, v, (fr * fr + fi * fi) * (g * g))
    total, product = 0.0, 1.0
    for k in range(first, n):
        if k != skipped:
            product *= moduli[k // LANES, k % LANES]
            if not (1e-100 < product < 1e100):
                total += math.log(product)
                product = 1.0
    return 0.5 * (total + math.log(product))
