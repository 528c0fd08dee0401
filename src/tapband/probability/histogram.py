"""A distribution function in bounded memory: integer counts in fine bins, exact mass beyond them.

Counts are integers, so the order in which blocks arrive changes nothing.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

BINS = 1 << 17
"""Over three interval lengths: about 1e-4 standard uncertainties a bin, interpolated inside it."""
_COARSE = 512


class Histogram:
    """Counts of one output over [low − span, high + span] of a pilot block's interval [low, high]."""

    def __init__(self, low: float, high: float, margin: float) -> None:
        # A constant output has no span: any bin narrower than its rounding will do.
        span = max(high - low, 1e-9 * max(abs(low), abs(high)), 1e-290)
        self._origin = low - margin * span
        self._width = (1.0 + 2.0 * margin) * span / BINS
        self._counts = np.zeros(BINS + 2, dtype=np.int64)
        self._cumulative: NDArray[np.int64] | None = None

    @property
    def total(self) -> int:
        """Values seen."""
        return int(self._counts.sum())

    def add(self, ordered: Array) -> None:
        """Count sorted values."""
        # Compared as floats first: a wild value would overflow an integer.
        place = np.clip((ordered - self._origin) / self._width, -1.0, float(BINS))
        bins, counts = np.unique(np.floor(place).astype(np.int64) + 1, return_counts=True)
        self._counts[bins] += counts
        self._cumulative = None

    def cumulative(self) -> NDArray[np.int64]:
        """Counts at or below the upper edge of each bin, the mass below the range first."""
        if self._cumulative is None:
            self._cumulative = np.cumsum(self._counts)
        return self._cumulative

    def holds(self, lower: float, upper: float) -> bool:
        """Whether the quantiles of two probabilities lie inside the range."""
        below, above = int(self._counts[0]), int(self._counts[-1])
        total = self.total
        return below <= lower * total and above <= (1.0 - upper) * total

    def quantile(self, probability: Array | float) -> Array:
        """Value below which a share of the counts lies, linear inside its bin."""
        cumulative = self.cumulative()
        wanted = np.asarray(probability, dtype=np.float64) * cumulative[-1]
        index = np.clip(np.searchsorted(cumulative, wanted, side="left"), 1, BINS)
        below = cumulative[index - 1]
        held = np.maximum(cumulative[index] - below, 1)
        inside = np.clip((wanted - below) / held, 0.0, 1.0)
        return np.asarray(self._origin + (index - 1 + inside) * self._width)

    def density(self, probability: float) -> float:
        """Density at a quantile, from the quantiles beside it.

        Half the spacing is 0.8 p(1−p) n^(−1/5), wide enough for a steady ratio and narrow against the tail.
        """
        reach = 0.8 * probability * (1.0 - probability) * max(self.total, 2) ** -0.2
        low, high = self.quantile(np.array([probability - reach, probability + reach]))
        return float(2.0 * reach / (high - low)) if high > low else float("inf")

    def shortest(self, level: float) -> tuple[float, float]:
        """Shortest interval that holds ``level`` (JCGM 101:2008, 5.3.4): a coarse search, then a fine one."""
        start = np.linspace(0.0, 1.0 - level, _COARSE + 1)
        for _ in range(2):
            low, high = self.quantile(start), self.quantile(np.minimum(start + level, 1.0))
            best = int(np.argmin(high - low))
            step = start[1] - start[0]
            start = np.linspace(
                max(start[best] - step, 0.0), min(start[best] + step, 1.0 - level), _COARSE // 4 + 1
            )
        return float(low[best]), float(high[best])
