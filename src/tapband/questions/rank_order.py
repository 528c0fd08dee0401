"""Places of shares, equal shares at equal places."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
TIE = 1e-9
"""Shares closer than this differ by rounding: they share a place, so that no order of input decides."""


def places(values: Array) -> NDArray[np.int64]:
    """1 for the largest along the last axis, and so on; equal values share a number, NaN come last."""
    sunk = np.where(np.isnan(values), -np.inf, values)
    order = np.argsort(-sunk, axis=-1, kind="stable")
    falling = np.take_along_axis(sunk, order, axis=-1)
    new = np.ones(falling.shape, dtype=np.bool_)
    with np.errstate(invalid="ignore"):
        new[..., 1:] = falling[..., :-1] - falling[..., 1:] > TIE
    position = np.where(new, np.arange(1, values.shape[-1] + 1), 1)
    result = np.empty(values.shape, dtype=np.int64)
    np.put_along_axis(result, order, np.maximum.accumulate(position, axis=-1), axis=-1)
    return result


def carriers(shares: Array, part: float = 0.9) -> list[int]:
    """Indices of the fewest entries, largest first, whose shares (n,) come to ``part`` of their whole sum.

    Empty where the sum is not positive.
    """
    known = np.nan_to_num(shares)
    whole = float(known.sum())
    if whole <= 0.0:
        return []
    order = np.argsort(-known, kind="stable")
    enough = int(np.argmax(np.cumsum(known[order]) >= part * whole * (1.0 - TIE)))
    return [int(i) for i in order[: enough + 1]]
