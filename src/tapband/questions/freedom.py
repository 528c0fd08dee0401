"""Where degrees of freedom make a target harder than the normal distribution says.

In units of the largest variance that a target allows at infinite degrees of freedom, v = V (z/limit)² and
q = Q (z/limit)⁴, the target is k(v²/q) √v ≤ z: for every v up to 1 it allows q up to h(v), one curve for all
targets of one level.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from tapband.probability.linearised import coverage_factor

Array = NDArray[np.float64]

FINENESS = 600
SAFE = 1e-3
"""Relative amount by which h is taken too large, above what interpolation can miss."""


def z_of(level: float) -> float:
    """Coverage factor at infinite degrees of freedom."""
    return float(coverage_factor(np.inf, level))


@lru_cache(maxsize=8)
def allowed(level: float) -> tuple[Array, Array]:
    """v and an upper bound of h(v) on a grid, each (K,)."""
    v = np.linspace(0.0, 1.0, FINENESS + 1)[1:]
    nu = np.geomspace(0.05, 1e8, 4000)
    k = coverage_factor(nu, level)
    wanted = z_of(level) / np.sqrt(v)
    # k falls as ν grows: the least ν that keeps k at the wanted value.
    least = np.interp(-wanted, -k, nu)
    return v, v**2 / least * (1.0 + SAFE)


def separating_line(v: float, q: float, level: float) -> tuple[float, float] | None:
    """Slope m and height c with q' − m v' ≤ c at every allowed (v', q') and q − m v > c; None: there is none."""
    grid, h = allowed(level)
    # Between grid points h may pass the chord by what its bend allows; the step's own change bounds that.
    bend = float(np.max(np.abs(np.diff(h, 2))))
    slopes = np.gradient(h, grid)
    heights = np.max(h[None, :] - slopes[:, None] * grid[None, :], axis=1) + bend
    heights = np.maximum(heights, 0.0)  # the origin is allowed
    gains = q - slopes * v - heights
    best = int(np.argmax(gains))
    return (float(slopes[best]), float(heights[best])) if gains[best] > 1e-9 else None
