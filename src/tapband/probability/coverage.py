"""Coverage intervals: the tolerance of JCGM 101, symmetric and shortest intervals, clause 8.

*Source* JCGM 101:2008, 5.3, 7.7, 7.9.2 and 8.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

if TYPE_CHECKING:
    from tapband.probability.linearised import Linearised
    from tapband.probability.montecarlo import MonteCarlo

Array = NDArray[np.float64]
ROUNDING = 1e-13
"""Rounding of a mean over trials, relative to the largest output."""


def tolerance(u: ArrayLike, digits: int = 2) -> Array:
    """Numerical tolerance δ = ½·10^l of u = c·10^l, c an integer of ``digits`` digits (JCGM 101, 7.9.2).

    Zero where u is zero, NaN where it is NaN.
    """
    value = np.asarray(u, dtype=np.float64)
    positive = value > 0
    safe = np.where(positive, value, 1.0)
    lead = np.floor(np.log10(safe))
    # 0.0996 is 0.10 to two digits: rounding may carry into the next decade.
    lead += np.round(safe / 10.0**lead, digits - 1) >= 10.0
    return np.where(positive, 0.5 * 10.0 ** (lead - digits + 1), np.where(np.isnan(value), np.nan, 0.0))


def agreement(linearised: Linearised, montecarlo: MonteCarlo) -> NDArray[np.bool_]:
    """Whether Monte Carlo confirms each linearised interval (P, m).

    No only where an end differs by more than δ plus twice the numerical standard deviation of that end;
    an output without an estimate has nothing to disagree on.

    *Source* JCGM 101:2008, 8.1; δ of the uncertainty under test, of the Monte Carlo one where that is zero.
    """
    u = np.where(linearised.u > 0, linearised.u, np.nan_to_num(montecarlo.u))
    # Where no error acts, a mean of equal numbers still rounds.
    delta = tolerance(u) + ROUNDING * np.maximum(np.abs(np.nan_to_num(linearised.estimate)), 1.0)
    low = np.abs(linearised.low - montecarlo.low) > delta + 2.0 * montecarlo.low_sd
    high = np.abs(linearised.high - montecarlo.high) > delta + 2.0 * montecarlo.high_sd
    # A Monte Carlo interval that could not be had confirms nothing.
    missing = np.isfinite(linearised.estimate) & ~(np.isfinite(montecarlo.low) & np.isfinite(montecarlo.high))
    return ~(low | high | missing)


def symmetric_of(ordered: Array, level: float) -> tuple[float, float]:
    """Probabilistically symmetric interval of sorted values (JCGM 101, 7.7.2)."""
    return value_at(ordered, 0.5 * (1.0 - level)), value_at(ordered, 0.5 * (1.0 + level))


def value_at(ordered: Array, probability: float) -> float:
    """Quantile of sorted values, linear between positions (i + ½)/n."""
    place = min(max(probability * len(ordered) - 0.5, 0.0), len(ordered) - 1.0)
    below = int(place)
    above = min(below + 1, len(ordered) - 1)
    return float(ordered[below] + (place - below) * (ordered[above] - ordered[below]))


def shortest_of(ordered: Array, level: float) -> tuple[float, float]:
    """Shortest interval among those that hold the share ``level`` of sorted values (JCGM 101, 7.7.4)."""
    held = min(max(int(np.ceil(level * len(ordered))), 1), len(ordered) - 1) if len(ordered) > 1 else 0
    lengths = ordered[held:] - ordered[: len(ordered) - held]
    start = int(np.argmin(lengths))
    return float(ordered[start]), float(ordered[start + held])
