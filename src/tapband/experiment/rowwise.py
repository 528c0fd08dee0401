"""Products whose every row is computed alone.

A matrix product of many rows may round a row differently according to how many rows stand beside it. Results
of a point must not depend on which other points are reduced with it.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

Values = NDArray[Any]


def each_row(rows: Values, matrix: Values) -> Values:
    """``rows @ matrix`` (P, k) from rows (P, n) and matrix (n, k), one row at a time."""
    return np.asarray((rows[..., None, :] @ matrix)[..., 0, :])
