"""Means of the rows of each point, gathered block by block in bounded memory."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


class Means:
    """Running means of k columns by point; a missing number makes the mean missing.

    Sums are of differences from a point's first row, so that equal rows have exactly their own mean.
    """

    def __init__(self, width: int) -> None:
        self._first = np.empty((0, width))
        self._sums = np.empty((0, width))
        self._counts = np.empty(0, dtype=np.int64)
        self._size = 0

    def add(self, point: NDArray[np.int64], numbers: Array) -> None:
        """Add rows (R, k) of points (R,); a new point's index follows on the last one."""
        size = max(self._size, int(point.max()) + 1)
        self._grow(size)
        new, row = np.unique(point[point >= self._size], return_index=True)
        self._first[new] = numbers[point >= self._size][row]
        self._size = size
        starts = np.append(0, np.flatnonzero(np.diff(point)) + 1)
        runs = np.diff(np.append(starts, point.size))
        np.add.at(self._counts, point[starts], runs)
        if starts.size == point.size and new.size == point.size:
            return
        difference = numbers - self._first[point]
        np.add.at(self._sums, point[starts], np.add.reduceat(difference, starts, axis=0))

    def _grow(self, size: int) -> None:
        room = self._counts.size
        if size <= room:
            return
        more = max(size, 2 * room) - room
        self._first = np.concatenate([self._first, np.zeros((more, self._first.shape[1]))])
        self._sums = np.concatenate([self._sums, np.zeros((more, self._sums.shape[1]))])
        self._counts = np.concatenate([self._counts, np.zeros(more, dtype=np.int64)])

    @property
    def counts(self) -> NDArray[np.int64]:
        """Rows of each point (P,)."""
        return self._counts[: self._size].copy()

    @property
    def means(self) -> Array:
        """Means (P, k)."""
        size = self._size
        return np.asarray(self._first[:size] + self._sums[:size] / self._counts[:size, None])
