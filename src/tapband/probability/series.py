"""The mean of a series in time, and how well it is known."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
BATCHES = 10
FEW = 20
"""Fewer samples than this are too few to see how they are correlated in time."""


def batch_covariance(series: Array) -> tuple[Array, int, tuple[str, ...]]:
    """Covariance (m, m) of the mean of a series (n, m), the number of batches b (ν = b − 1), and notes.

    Batch means carry the correlation in time and between the columns. With fewer than 20 samples each sample
    is its own batch, and the note says so.

    *Source* Conway, Management Science 10 (1963) 47; Law and Kelton, Simulation Modeling and Analysis, ch. 9.
    """
    size = len(series)
    notes: list[str] = []
    if size < FEW:
        notes.append(f"{size} samples are too few to see correlation in time; they are taken as independent")
        batches = size
    else:
        batches = BATCHES
    length = size // batches
    kept = series[size - batches * length :]
    means = kept.reshape(batches, length, -1).mean(axis=1)
    centred = means - means.mean(axis=0)
    return centred.T @ centred / (batches * (batches - 1)), batches, tuple(notes)
