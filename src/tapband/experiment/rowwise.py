"""Products whose every row is computed alone, or in pieces of fixed size.

A matrix product of many rows may round a row differently according to how many rows stand beside it, and to
how many threads a linear-algebra library takes for it. Results of a point must depend on neither.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

Values = NDArray[Any]
ALONE = 65_536 * 4
"""Multiplications up to which OpenBLAS keeps a product on the calling thread (``SMP_THRESHOLD_MIN`` times
``GEMM_MULTITHREAD_THRESHOLD`` of its interface/gemm.c). Beyond, its own threads compete with ours."""


def each_row(rows: Values, matrix: Values) -> Values:
    """``rows @ matrix`` (P, k) from rows (P, n) and matrix (n, k), one row at a time."""
    return np.asarray((rows[..., None, :] @ matrix)[..., 0, :])


def in_pieces(rows: Values, matrix: Values) -> Values:
    """``rows @ matrix`` (…, T, k) from rows (…, T, n) and matrix (n, k), few enough rows at a time."""
    count, most = rows.shape[-2], ALONE // matrix.size
    if count <= most:
        return np.asarray(rows @ matrix)
    size = 1 << max(most, 1).bit_length() - 1
    product = np.empty((*rows.shape[:-1], matrix.shape[1]), dtype=np.result_type(rows, matrix))
    for start in range(0, count, size):
        piece = slice(start, start + size)
        np.matmul(rows[..., piece, :], matrix, out=product[..., piece, :])
    return product


def sum_in_pieces(rows: Values, matrix: Values) -> Values:
    """``rows @ matrix`` (r, k) of a few rows (r, Q) with a long sum over Q, some terms at a time."""
    size = max(1, ALONE // (len(rows) * matrix.shape[1]))
    total = np.zeros((len(rows), matrix.shape[1]))
    for start in range(0, len(matrix), size):
        total += rows[:, start : start + size] @ matrix[start : start + size]
    return total
