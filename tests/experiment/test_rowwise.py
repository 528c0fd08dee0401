"""Products in pieces: the same numbers, whatever the number of rows and of a library's threads."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from tapband.experiment.rowwise import ALONE, in_pieces

TESTS = Path(__file__).parents[1]
REDUCED = """
from campaigns import campaign, every_kind, TWELVE
from tapband.reduction import reduce_campaign
reduced = reduce_campaign(campaign(every_kind(), taps=TWELVE.taps(101, "cosine", 0.98)), "600", threads=1)
print(reduced.linear.U.tobytes().hex(), reduced.montecarlo.high.tobytes().hex())
"""


@pytest.mark.parametrize("count", [1, 67, 256, 500, 997])
def test_pieces_equal_the_whole_product(count: int) -> None:
    """997 is prime and leaves a remainder. Sums of 61 products in another order differ by rounding."""
    rng = np.random.default_rng(3)
    rows, matrix = rng.normal(size=(2, count, 61)), rng.normal(size=(61, 61))
    np.testing.assert_allclose(in_pieces(rows, matrix), rows @ matrix, rtol=0, atol=61 * 1e-15 * 4)


def test_a_matrix_too_large_for_one_piece_goes_row_by_row() -> None:
    side = 600
    assert side * side > ALONE
    rows, matrix = np.ones((3, side)), np.eye(side)
    np.testing.assert_array_equal(in_pieces(rows, matrix), rows)


def test_threads_of_the_linear_algebra_library_change_no_bit() -> None:
    """101 taps and 600 trials: whole products would be large enough to be shared between threads."""
    found = set()
    for threads in ("1", "2"):
        environment = {**os.environ, "OPENBLAS_NUM_THREADS": threads, "PYTHONPATH": str(TESTS)}
        done = subprocess.run(
            [sys.executable, "-c", REDUCED], env=environment, capture_output=True, text=True, check=True
        )
        found.add(done.stdout)
    assert len(found) == 1
