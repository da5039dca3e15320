"""The complex elimination against NumPy's."""

from __future__ import annotations

import math

import numpy as np
import pytest
from numpy.typing import NDArray

from mcgeo.kernels.determinant import lane_vectors, log_modulus_of_determinant, row_width

Complex = NDArray[np.complex128]


def stored(matrix: Complex) -> NDArray[np.float64]:
    n = len(matrix)
    v = lane_vectors(n)
    out = np.zeros((n, row_width(n), 8))
    for start, part in ((0, matrix.real), (v, matrix.imag)):
        padded = np.zeros((n, 8 * v))
        padded[:, :n] = part
        out[:, start : start + v] = padded.reshape(n, v, 8)
    return out.reshape(-1, 8)


def log_modulus(matrix: Complex) -> float:
    n = len(matrix)
    return float(log_modulus_of_determinant(stored(matrix), np.zeros((n, 8)), n))


def random_matrix(n: int, seed: int = 0) -> Complex:
    real, imag = np.random.default_rng(seed).normal(size=(2, n, n))
    return np.asarray(real + 1j * imag)


@pytest.mark.parametrize("n", [1, 2, 3, 4, 5, 7, 8, 9, 12, 13, 16, 17, 24, 37, 61])
def test_agrees_with_a_library(n: int) -> None:
    for seed in range(4):
        matrix = random_matrix(n, seed)
        assert log_modulus(matrix) == pytest.approx(np.linalg.slogdet(matrix)[1], abs=1e-11)


def test_rows_are_exchanged_where_the_leading_entry_is_tiny() -> None:
    matrix = random_matrix(13)
    matrix[0, 0] = 0.0
    matrix[5, :5] = 1e-18
    assert log_modulus(matrix) == pytest.approx(np.linalg.slogdet(matrix)[1], abs=1e-11)


def test_scales_of_rows_that_would_overflow_a_product() -> None:
    matrix = random_matrix(20)
    scales = np.where(np.arange(20) % 2 == 0, 290.0, -80.0)
    expected = np.linalg.slogdet(matrix)[1] + scales.sum()
    assert log_modulus(matrix * np.exp(scales)[:, None]) == pytest.approx(expected, abs=1e-9)


def test_a_singular_matrix_has_no_logarithm() -> None:
    matrix = random_matrix(9)
    matrix[:, 6] = 0.0
    assert log_modulus(matrix) == -math.inf
