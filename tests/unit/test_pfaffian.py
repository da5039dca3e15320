"""Inverse and determinant of antisymmetric matrices, and rows exchanged."""

import mpmath
import numpy as np
import pytest

from mcgeo.kernels.lanes import LANES, aligned_zeros
from mcgeo.kernels.pfaffian import exchange_row, invert
from tests.exact.moore_read_theta import pfaffian


def antisymmetric(n, seed):
    random = np.random.default_rng(seed)
    matrix = random.normal(size=(n, n)) + 1j * random.normal(size=(n, n))
    return matrix - matrix.T


def stored(vectors):
    """Real and imaginary part of complex rows in blocks of eight lanes, the last one filled up with zeros."""
    rows = np.atleast_2d(vectors)
    out = aligned_zeros((2, len(rows) * -(-rows.shape[1] // LANES), LANES))
    out.reshape(2, len(rows), -1)[:, :, : rows.shape[1]] = rows.real, rows.imag
    return out


def complex_matrix(parts, n):
    rows = parts.reshape(2, n, -1)
    assert np.all(rows[:, :, n:] == 0.0)
    return rows[0, :, :n] + 1j * rows[1, :, :n]


@pytest.mark.parametrize("n", [2, 4, 8, 14, 30, 100])
def test_inverse_and_determinant(n):
    matrix = antisymmetric(n, n)
    parts = stored(matrix)
    log_determinant = invert(parts[0], parts[1], n)
    np.testing.assert_allclose(complex_matrix(parts, n) @ matrix, np.eye(n), atol=1e-10)
    assert log_determinant == pytest.approx(np.linalg.slogdet(matrix)[1], abs=1e-10)


@pytest.mark.parametrize("n", [2, 4, 8])
def test_determinant_is_the_square_of_the_pfaffian(n):
    matrix = antisymmetric(n, 7)
    parts = stored(matrix)
    exact = 2 * mpmath.log(abs(pfaffian(matrix.tolist(), tuple(range(n)))))
    assert invert(parts[0], parts[1], n) == pytest.approx(float(exact), abs=1e-10)


@pytest.mark.parametrize("n", [2, 4, 16, 30])
def test_exchanged_rows(n):
    matrix = antisymmetric(n, 3)
    parts = stored(matrix)
    invert(parts[0], parts[1], n)
    work = aligned_zeros((4, -(-n // LANES), LANES))
    for i in (0, n - 1, n // 2):
        row = antisymmetric(n, 10 + i)[i]
        exchange_row(parts[0], parts[1], n, i, stored(row), work)
        matrix[i], matrix[:, i] = row, -row
        inverse = complex_matrix(parts, n)
        np.testing.assert_allclose(inverse @ matrix, np.eye(n), atol=1e-10)
        np.testing.assert_allclose(inverse, -inverse.T, atol=1e-10)


def test_storage_starts_at_a_cache_line():
    assert all(aligned_zeros((rows, LANES)).ctypes.data % 64 == 0 for rows in range(1, 20))
