"""Metropolis moves of the composite-fermion sea on the torus.

A move of electron i replaces row i of the matrix M of `mcgeo.kernels.fermi_sea_torus` and multiplies entry (k, a) of
every other row by f(e_a w_k/w_i') g' / (f(e_a w_k/w_i) g). The divided matrix is made once per visited electron and
serves all its proposals; each proposal costs n^2 factors and one elimination. In a sea with a centre of symmetry the
same factors make row i. Eight walkers share the random numbers' lanes; each is advanced on its own, with the columns
along the lanes.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np

from mcgeo.kernels._jit import kernel
from mcgeo.kernels.determinant import lane_vectors, log_modulus_of_determinant, row_width
from mcgeo.kernels.elementary import next_uniform
from mcgeo.kernels.fermi_sea_torus import (
    column_factors,
    fill_row,
    log_pair_product,
    pair_constants,
    phase,
    row_product,
)
from mcgeo.kernels.lanes import LANES, aligned_zeros, load, splat, store


class FermiSeaStore(NamedTuple):
    """What eight walkers keep between moves.

    Attributes
    ----------
    electrons : ndarray, shape (8, 5 n_vectors, 8)
        Per walker, as in `pair_constants`.
    matrices : ndarray, shape (8, n row_width(n), 8)
        Per walker, in the layout of `mcgeo.kernels.determinant`.
    log_det : ndarray, shape (8,)
        log |det M|.
    """

    electrons: np.ndarray
    matrices: np.ndarray
    log_det: np.ndarray


class _Scratch(NamedTuple):
    divided: np.ndarray
    candidate: np.ndarray
    work: np.ndarray
    multipliers: np.ndarray
    pairs: np.ndarray
    columns: np.ndarray
    product: np.ndarray


@kernel
def _scratch(n: int) -> Any:
    matrix_rows, n_vectors = n * row_width(n), lane_vectors(n)
    return _Scratch(
        np.zeros((matrix_rows, LANES)),
        np.zeros((matrix_rows, LANES)),
        np.zeros((matrix_rows, LANES)),
        np.zeros((n, LANES)),
        np.zeros((5 * n_vectors, LANES)),
        np.zeros((2 * n, LANES)),
        np.zeros((2 * n_vectors, LANES)),
    )


def fermi_sea_store(n: int) -> FermiSeaStore:
    """Room for eight walkers of ``n`` electrons, to be filled by `refresh`."""
    return FermiSeaStore(
        aligned_zeros((LANES, 5 * lane_vectors(n), LANES)),
        aligned_zeros((LANES, n * row_width(n), LANES)),
        np.zeros(LANES),
    )


@kernel
def _put_electron(electrons: np.ndarray, n_vectors: int, i: int, point: Any, b: float) -> None:
    row, lane = i // LANES, i % LANES
    electrons[row, lane] = point[0]
    electrons[n_vectors + row, lane] = point[1]
    electrons[2 * n_vectors + row, lane] = point[2]
    electrons[3 * n_vectors + row, lane] = point[3]
    electrons[4 * n_vectors + row, lane] = b


@kernel
def _electron(electrons: np.ndarray, n_vectors: int, i: int) -> Any:
    row, lane = i // LANES, i % LANES
    return (
        electrons[row, lane],
        electrons[n_vectors + row, lane],
        electrons[2 * n_vectors + row, lane],
        electrons[3 * n_vectors + row, lane],
    )


@kernel
def refresh(tables: Any, a: np.ndarray, b: np.ndarray, kept: Any) -> None:
    """Phases, matrices and determinants from the positions of shape (n_electrons, 8)."""
    n = tables.n_electrons
    n_vectors = lane_vectors(n)
    scratch = _scratch(n)
    for walker in range(LANES):
        electrons, matrix = kept.electrons[walker], kept.matrices[walker]
        for i in range(LANES * n_vectors):
            j = min(i, n - 1)
            point = phase(tables, a[j, walker], b[j, walker])
            _put_electron(electrons, n_vectors, i, point, b[j, walker])
        for i in range(n):
            point = _electron(electrons, n_vectors, i)
            pair_constants(tables, electrons, point, b[i, walker], scratch.pairs)
            row_product(tables, tables.mirrored, scratch.pairs, i, scratch.columns, scratch.product)
            fill_row(tables, scratch.product, False, point, i, matrix)
        scratch.work[:] = matrix
        kept.log_det[walker] = log_modulus_of_determinant(scratch.work, scratch.multipliers, n)


@kernel
def _divide_out(tables: Any, matrix: np.ndarray, scratch: Any, i: int) -> None:
    """All rows but i without the factors of electron i, whose pair constants are in ``scratch``."""
    n = tables.n_electrons
    n_vectors, width = lane_vectors(n), row_width(n)
    columns, divided = scratch.columns, scratch.divided
    for v in range(n_vectors):
        column_factors(tables, tables.shifts, v, scratch.pairs, columns)
        for k in range(n):
            if k != i:
                fr, fi = load(columns, 2 * k), load(columns, 2 * k + 1)
                scale = 1.0 / (fr * fr + fi * fi)
                real, imag = width * k + v, width * k + n_vectors + v
                mr, mi = load(matrix, real), load(matrix, imag)
                store(divided, real, (mr * fr + mi * fi) * scale)
                store(divided, imag, (mi * fr - mr * fi) * scale)


@kernel
def _multiply_in(tables: Any, scratch: Any, i: int, point: Any) -> None:
    """Candidate matrix with electron i at ``point`` (pair constants in ``scratch``), and a copy to eliminate."""
    n = tables.n_electrons
    n_vectors, width = lane_vectors(n), row_width(n)
    divided, candidate, work = scratch.divided, scratch.candidate, scratch.work
    columns, product = scratch.columns, scratch.product
    for v in range(n_vectors):
        column_factors(tables, tables.shifts, v, scratch.pairs, columns)
        pr, pi = splat(1.0), splat(0.0)
        for k in range(n):
            if k != i:
                fr, fi = load(columns, 2 * k), load(columns, 2 * k + 1)
                real, imag = width * k + v, width * k + n_vectors + v
                mr, mi = load(divided, real), load(divided, imag)
                tr, ti = mr * fr - mi * fi, mr * fi + mi * fr
                store(candidate, real, tr)
                store(candidate, imag, ti)
                store(work, real, tr)
                store(work, imag, ti)
                pr, pi = pr * fr - pi * fi, pr * fi + pi * fr
        store(product, v, pr)
        store(product, n_vectors + v, pi)
    if not tables.symmetric:
        row_product(tables, tables.mirrored, scratch.pairs, i, columns, product)
    fill_row(tables, product, tables.symmetric, point, i, candidate)
    for v in range(width * i, width * (i + 1)):
        store(work, v, load(candidate, v))


@kernel
def _visit(
    tables: Any, a: np.ndarray, b: np.ndarray, kept: Any, scratch: Any, walker: int, i: int, step: float,
    uniforms: np.ndarray,
) -> int:  # fmt: skip
    """All proposals of electron i of one walker from three random numbers each; returns how many were accepted."""
    n = tables.n_electrons
    n_vectors = lane_vectors(n)
    electrons, matrix = kept.electrons[walker], kept.matrices[walker]
    xa, xb = a[i, walker], b[i, walker]
    pair_constants(tables, electrons, _electron(electrons, n_vectors, i), xb, scratch.pairs)
    _divide_out(tables, matrix, scratch, i)
    log_pairs = 0.0
    if tables.pair_exponent > 0:
        log_pairs = log_pair_product(tables, scratch.pairs, 0, i)
    n_accepted = 0
    for hit in range(uniforms.shape[0] // 3):
        shift_b = (uniforms[3 * hit + 1, walker] - 0.5) * (step / (tables.side * tables.tau_imag))
        new_b = xb + shift_b
        new_a = xa + (uniforms[3 * hit, walker] - 0.5) * (step / tables.side) - shift_b * tables.tau_real
        new_b -= math.floor(new_b + 0.5)
        new_a -= math.floor(new_a + 0.5)
        point = phase(tables, new_a, new_b)
        pair_constants(tables, electrons, point, new_b, scratch.pairs)
        _multiply_in(tables, scratch, i, point)
        new_log_det = log_modulus_of_determinant(scratch.work, scratch.multipliers, n)
        new_log_pairs = 0.0
        if tables.pair_exponent > 0:
            new_log_pairs = log_pair_product(tables, scratch.pairs, 0, i)
        gain = (
            2.0 * (new_log_det - kept.log_det[walker])
            + 2.0 * tables.pair_exponent * (new_log_pairs - log_pairs)
            - 4.0 * math.pi * tables.tau_imag * tables.mean_power * (new_b - xb)
        )
        if uniforms[3 * hit + 2, walker] < math.exp(min(gain, 0.0)):
            for row in range(matrix.shape[0]):
                store(matrix, row, load(scratch.candidate, row))
            _put_electron(electrons, n_vectors, i, point, new_b)
            xa, xb, log_pairs = new_a, new_b, new_log_pairs
            kept.log_det[walker] = new_log_det
            n_accepted += 1
    a[i, walker], b[i, walker] = xa, xb
    return n_accepted


@kernel
def sweep(
    tables: Any, a: np.ndarray, b: np.ndarray, kept: Any, words: np.ndarray, accepted: np.ndarray, step: float,
    n_hits: int,
) -> None:  # fmt: skip
    """One sweep of eight walkers: every electron gets ``n_hits`` proposals, uniform on a square of side ``step`` (l_B).

    Parameters
    ----------
    a, b : ndarray, shape (n_electrons, 8)
        Fractions of the cell in [-1/2, 1/2]; updated, as is ``kept``.
    words : ndarray of uint64, shape (4, 8)
        The lanes' generators; updated.
    accepted : ndarray, shape (1, 8)
        Incremented by the number of accepted proposals.
    """
    scratch = _scratch(tables.n_electrons)
    uniforms = np.empty((3 * n_hits, LANES))
    s0, s1, s2, s3 = load(words, 0), load(words, 1), load(words, 2), load(words, 3)
    for i in range(tables.n_electrons):
        for draw in range(3 * n_hits):
            u, s0, s1, s2, s3 = next_uniform(s0, s1, s2, s3)
            store(uniforms, draw, u)
        for walker in range(LANES):
            accepted[0, walker] += _visit(tables, a, b, kept, scratch, walker, i, step, uniforms)
    store(words, 0, s0)
    store(words, 1, s1)
    store(words, 2, s2)
    store(words, 3, s3)


@kernel
def log_weights(tables: Any, a: np.ndarray, b: np.ndarray, kept: Any, out: np.ndarray) -> None:
    """log W of each walker up to a constant of the cell and the sea.

    Parameters
    ----------
    a, b : ndarray, shape (n_electrons, 8)
    kept : FermiSeaStore
        Refreshed at these positions.
    out : ndarray, shape (8,)
        Written.
    """
    n = tables.n_electrons
    n_vectors = lane_vectors(n)
    pairs = np.empty((5 * n_vectors, LANES))
    for walker in range(LANES):
        electrons = kept.electrons[walker]
        log_pairs, sum_b = 0.0, 0.0
        for i in range(n):
            sum_b += b[i, walker]
            if tables.pair_exponent > 0:
                pair_constants(tables, electrons, _electron(electrons, n_vectors, i), b[i, walker], pairs)
                log_pairs += log_pair_product(tables, pairs, i + 1, n)
        out[walker] = (
            2.0 * kept.log_det[walker]
            + 2.0 * tables.pair_exponent * log_pairs
            - 4.0 * math.pi * tables.tau_imag * tables.mean_power * sum_b
        )
