"""What a Monte Carlo engine hands back: for one point, and for all of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from tapband.probability.coverage import ROUNDING, tolerance

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Numbers:
    """Estimates and what they are worth, (m,) of one point or (P, m); NaN where one does not exist."""

    mean: Array
    u: Array
    """Standard deviation; NaN where a contributing source has 2 degrees of freedom or fewer."""
    low: Array
    high: Array
    short_low: Array
    short_high: Array
    mean_sd: Array
    """Numerical standard deviations: of what more trials would still change. NaN where none exists: for the
    mean where a drawn source has 2 degrees of freedom or fewer, for u where it has 4 or fewer."""
    u_sd: Array
    low_sd: Array
    high_sd: Array
    short_low_sd: Array
    short_high_sd: Array


@dataclass(frozen=True, slots=True, kw_only=True)
class Outcome:
    """One point: numbers (m,), trials (m,), refused trials, whether the tolerance was reached (m,)."""

    numbers: Numbers
    trials: NDArray[np.int64]
    refused: int
    reached: NDArray[np.bool_]
    method: str


@dataclass(frozen=True, slots=True, kw_only=True)
class MonteCarlo(Numbers):
    """All points: :class:`Numbers` (P, m)."""

    trials: NDArray[np.int64]
    """(P, m)"""
    refused: NDArray[np.int64]
    """(P,) trials in which some output was refused; they are counted, never replaced."""
    reached: NDArray[np.bool_]
    """(P, m) whether twice every numerical standard deviation is below δ (JCGM 101:2008, 7.9.4)."""
    method: tuple[str, ...]
    """How each point was done: "plain", "integrated", "line", or two joined by a plus sign."""


NAMES = tuple(field.name for field in fields(Numbers))


def collected(outcomes: Sequence[Outcome], outputs: int) -> MonteCarlo:
    """Outcomes of all points in order, as read-only arrays."""
    shape = (len(outcomes), outputs)
    rows = {name: [getattr(o.numbers, name) for o in outcomes] for name in NAMES}
    result = MonteCarlo(
        **{name: np.array(values, dtype=np.float64).reshape(shape) for name, values in rows.items()},
        trials=np.array([o.trials for o in outcomes], dtype=np.int64).reshape(shape),
        refused=np.array([o.refused for o in outcomes], dtype=np.int64),
        reached=np.array([o.reached for o in outcomes], dtype=np.bool_).reshape(shape),
        method=tuple(o.method for o in outcomes),
    )
    for name in (*NAMES, "trials", "refused", "reached"):
        getattr(result, name).setflags(write=False)
    return result


def tolerance_met(numbers: Numbers, fallback_u: Array) -> NDArray[np.bool_]:
    """Whether 2·sd < δ for mean, u and both ends (JCGM 101:2008, 7.9.4 g); what does not exist is left out.

    δ is that of u; of ``fallback_u`` (the linearised one) where u does not exist. An output that no error
    moves has met it.
    """
    delta = tolerance(np.where(np.isnan(numbers.u), fallback_u, numbers.u))
    rounding = ROUNDING * np.maximum(np.abs(np.nan_to_num(numbers.mean)), 1.0)
    met = np.ones(numbers.low.shape, dtype=bool)
    for value, spread in ((numbers.mean, numbers.mean_sd), (numbers.u, numbers.u_sd)):
        met &= np.isnan(value + spread) | (2.0 * spread < delta) | (spread <= rounding)
    for spread in (numbers.low_sd, numbers.high_sd):
        met &= (2.0 * spread < delta) | (spread <= rounding)
    return met
