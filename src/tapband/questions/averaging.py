"""How long to average: the random part of a record's mean, and what a target leaves for it.

The reading of a tap swings in time with standard deviation σ and integral time scale T. The mean over a
record R of a signal whose correlation falls as exp(−t/T) has the variance

    σ² (2T/R) [1 − (T/R)(1 − exp(−R/T))],

so that about R/2T values are independent. Taps are taken to swing independently of each other; ``bound`` is
what the worst correlation between them would make.

*Source* Bendat and Piersol, Random Data (1986), section 8.2 (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, exp, inf, nan

import numpy as np
from numpy.typing import NDArray

from tapband.questions.basis import Basis, expanded_of
from tapband.questions.freedom import z_of

Array = NDArray[np.float64]

POWER = 0.9
"""Probability with which repeats shall show a difference."""
LONGEST = 1e6
"""Records past this many time scales are not asked for."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Averaging:
    """What averaging does to each demand (D,)."""

    single: Array
    """Standard uncertainty of a coefficient from one instant, taps independent."""
    bound: Array
    """The same with the worst correlation between taps."""
    mean: Array
    """Standard uncertainty from the mean over the forecast's record; NaN where it states none."""
    record: Array
    """Shortest record [s] at which the target is met, the fluctuation counted; NaN where none is long enough."""
    effective: float
    """Independent values in the forecast's record; NaN where it states none."""
    time_scale: float
    repeats: NDArray[np.int64]
    """Points to take at each of two conditions to see a difference as large as the target; 0: cannot be said."""


def averaging(basis: Basis, factor: Array) -> Averaging | None:
    """What the forecast's fluctuation asks for; None where it states no fluctuation or no time scale.

    ``factor`` (D,) is the ratio of the headline interval to the linearised one as declared.
    """
    forecast = basis.campaign.plan.forecast
    if forecast is None or not forecast.fluctuation or forecast.time_scale is None:
        return None
    demands, time_scale = basis.demands, forecast.time_scale
    pressure = forecast.fluctuation * basis.assembled.stream.q[demands.point]
    weight = _by_reading(basis)
    single = pressure * np.sqrt(np.sum(weight**2, axis=1))
    shrink = nan if forecast.record is None else mean_variance(forecast.record, time_scale) ** 0.5
    record = np.array(
        [_shortest(basis, d, float(single[d]), float(factor[d]), time_scale) for d in range(single.size)]
    )
    random = np.sqrt(_random_variance(basis) + (0.0 if np.isnan(shrink) else shrink * single) ** 2)
    return Averaging(
        single=single,
        bound=pressure * np.sum(np.abs(weight), axis=1),
        mean=shrink * single,
        record=record,
        effective=nan if forecast.record is None else 1.0 / mean_variance(forecast.record, time_scale),
        time_scale=time_scale,
        repeats=np.array(
            [
                repeats_needed(float(u), float(t), basis.level)
                for u, t in zip(random, demands.limit, strict=True)
            ],
            dtype=np.int64,
        ),
    )


def mean_variance(record: float, time_scale: float) -> float:
    """Variance of the mean over a record, over that of one value; times [s]."""
    ratio = time_scale / record
    return 2.0 * ratio * (1.0 - ratio * (1.0 - exp(-min(1.0 / ratio, 700.0))))


def repeats_needed(random: float, difference: float, level: float, power: float = POWER) -> int:
    """Points at each of two conditions for a difference of their means to be significant, with this probability.

    ``random`` is the standard uncertainty that changes from point to point, known beforehand; what points
    share cancels. n = 2 ((z_level + z_power) random/difference)², at least 1.
    """
    from scipy.special import ndtri

    return max(1, ceil(2.0 * ((z_of(level) + float(ndtri(power))) * random / difference) ** 2 - 1e-9))


def _by_reading(basis: Basis) -> Array:
    """(D, n) ∂coefficient/∂reading of each tap."""
    demands = basis.demands
    weight = np.zeros((demands.limit.size, basis.raw.readings.shape[1]))
    for at in basis.slopes:
        here = np.isin(demands.point, at.points)
        row = np.searchsorted(at.points, demands.point[here])
        weight[here] = at.slopes.reading[row, demands.output[here]]
    return weight


def _random_variance(basis: Basis) -> Array:
    """(D,) variance of the sources that are drawn anew at each point."""
    random = np.array([not f.systematic for f in basis.assembled.problem.families], dtype=np.bool_)
    return np.asarray(basis.variance[:, random].sum(axis=1))


def _shortest(basis: Basis, d: int, single: float, factor: float, time_scale: float) -> float:
    """Shortest record [s] with which demand ``d`` is met; NaN: none, 0: one instant does."""
    variance, quartic = basis.variance[d].sum(), basis.quartic[d].sum()
    limit = basis.demands.limit[d] / (factor if np.isfinite(factor) else 1.0)

    def meets(record: float) -> bool:
        share = 1.0 if record == 0.0 else 0.0 if record == inf else mean_variance(record, time_scale)
        return bool(
            expanded_of(np.asarray(variance + share * single**2), np.asarray(quartic), basis.level) <= limit
        )

    if meets(0.0):
        return 0.0
    low, high = 1e-3 * time_scale, LONGEST * time_scale
    if not meets(high):
        return nan
    for _ in range(80):
        middle = (low * high) ** 0.5
        low, high = (low, middle) if meets(middle) else (middle, high)
    return high
