"""The stretch of angles on which the lift curve counts as straight: as stated, or found."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
DEPARTURE = 0.01
"""Departure from the line, as a part of the lift range of the polar, that still counts as straight."""
RANDOM = 3.0
"""So do so many random standard uncertainties."""


def stated(alpha: Array, limits: tuple[float, float]) -> Mask:
    """Points (n,) whose angle lies in the stated range [rad]."""
    slack = 1e-9
    return (alpha >= limits[0] - slack) & (alpha <= limits[1] + slack)


def found(alpha: Array, cl: Array, random: Array, level: NDArray[np.int64]) -> Mask:
    """The longest stretch about zero lift that departs from its own line by no more than is allowed.

    Grown from the three neighbouring points nearest zero lift, each time to the side that departs less.
    ``random`` (n,) is the random standard uncertainty of cl, ``level`` (n,) numbers the distinct angles.
    """
    n = alpha.size
    allowed = np.maximum(DEPARTURE * np.ptp(cl), RANDOM * random)
    start = int(np.clip(np.argmin(np.abs(cl)) - 1, 0, n - 3))
    stop = start + 3
    while level[stop - 1] - level[start] < 2:
        start, stop = (start, stop + 1) if stop < n else (start - 1, stop)
    while True:
        sides = [(start - 1, stop)] * (start > 0) + [(start, stop + 1)] * (stop < n)
        worst = [_departure(alpha, cl, allowed, *side) for side in sides]
        if not worst or min(worst) > 1.0:
            break
        start, stop = sides[int(np.argmin(worst))]
    mask = np.zeros(n, dtype=np.bool_)
    mask[start:stop] = True
    return mask


def _departure(alpha: Array, cl: Array, allowed: Array, start: int, stop: int) -> float:
    """Largest departure from the least-squares line, over what is allowed."""
    x, y = alpha[start:stop], cl[start:stop]
    x = x - x.mean()
    slope = (x @ y) / (x @ x)
    return float(np.max(np.abs(y - y.mean() - slope * x) / np.maximum(allowed[start:stop], 1e-300)))
