"""What plain Monte Carlo keeps of one point while blocks of trials pass: counts, sums, blocks' estimates."""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri, stdtrit

from tapband.probability.coverage import shortest_of, symmetric_of
from tapband.probability.histogram import Histogram
from tapband.probability.model import Model
from tapband.probability.outcome import Numbers, Outcome, tolerance_met

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

FEWEST = 10
"""Blocks before the scatter between them is believed."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Block:
    """One block of one point: finite values of each output, sorted; trials, and how many were refused."""

    ordered: tuple[Array, ...]
    trials: int
    refused: int


class Tally:
    """Running result of one point; ``margin`` as in :class:`Histogram`, ``rows`` (m,) those to be settled."""

    def __init__(
        self, model: Model, point: int, level: float, margin: float, rows: Mask | None = None
    ) -> None:
        self._level = level
        self._margin = margin
        self._moments = model.moments(point)
        self._linear_u = model.u[point]
        self._live = np.isfinite(model.estimate[point])
        self._rows = self._live if rows is None else self._live & rows
        self._origin = np.where(self._live, model.estimate[point], 0.0)
        self._histograms: list[Histogram | None] = [None] * len(self._live)
        self._power = np.zeros((5, len(self._live)))
        self._blocks: list[Array] = []
        self._trials = self._refused = 0
        self._next = FEWEST
        self.settled = False

    def add(self, block: Block) -> None:
        """Count a block, and decide whether it was the last one needed."""
        stats = np.full((6, len(self._live)), np.nan)
        for j, ordered in enumerate(block.ordered):
            if len(ordered) > 1:
                stats[:, j] = self._count(j, ordered)
        self._blocks.append(stats)
        self._trials += block.trials
        self._refused += block.refused
        if len(self._blocks) >= self._next:
            # Not after every block: who asks too often stops at a lucky moment.
            self._next = ceil(1.2 * len(self._blocks))
            self.settled = bool(np.all(tolerance_met(self._numbers(ends=False), self._linear_u)[self._rows]))

    def _count(self, j: int, ordered: Array) -> tuple[float, ...]:
        """Estimates of one block of one output (mean, u, ends, short ends), after counting it."""
        low, high = symmetric_of(ordered, self._level)
        histogram = self._histograms[j]
        if histogram is None:
            histogram = self._histograms[j] = Histogram(low, high, self._margin)
        histogram.add(ordered)
        away = ordered - self._origin[j]
        square = away * away
        sums = (len(away), away.sum(), square.sum(), (square * away).sum(), (square * square).sum())
        self._power[:, j] += sums
        mean = sums[1] / len(away)
        u = np.sqrt(max(sums[2] - sums[1] * mean, 0.0) / (len(away) - 1))
        return float(mean), float(u), low, high, *shortest_of(ordered, self._level)

    @property
    def clipped(self) -> bool:
        """Whether an end of an interval fell outside the range that the first block suggested."""
        tail = 0.5 * (1.0 - self._level)
        return any(h is not None and not h.holds(tail, 1.0 - tail) for h in self._histograms)

    def outcome(self) -> Outcome:
        """The result so far."""
        numbers = self._numbers(ends=True)
        return Outcome(
            numbers=numbers,
            trials=np.where(self._live, self._trials, 0),
            refused=self._refused,
            reached=tolerance_met(numbers, self._linear_u) | ~self._live,
            method="plain",
        )

    def _numbers(self, *, ends: bool) -> Numbers:
        """Estimates; the ends themselves only when asked: the decision to stop needs just their scatter."""
        count, first, second, third, fourth = self._power
        n = np.where(count > 1, count, np.nan)
        shift = first / n
        spread = np.sqrt(np.maximum(second - first * shift, 0.0) / (n - 1.0))
        tail = 0.5 * (1.0 - self._level)
        low, high, short_low, short_high = np.where(n > 1, np.zeros((4, 1)), np.nan)
        if ends:
            for j, histogram in enumerate(self._histograms):
                if histogram is not None:
                    low[j], high[j] = histogram.quantile(np.array([tail, 1.0 - tail]))
                    short_low[j], short_high[j] = histogram.shortest(self._level)
        moment4 = fourth / n - 4.0 * shift * third / n + 6.0 * shift**2 * second / n - 3.0 * shift**4
        sd = self._scatter() if len(self._blocks) >= FEWEST else self._formulas(spread, moment4, tail)
        exists = self._moments
        return Numbers(
            mean=np.where(exists.mean, self._origin + shift, np.nan),
            u=np.where(exists.u, spread, np.nan),
            low=low,
            high=high,
            short_low=short_low,
            short_high=short_high,
            mean_sd=np.where(exists.mean_scatter, sd[0], np.nan),
            u_sd=np.where(exists.u_scatter, sd[1], np.nan),
            low_sd=sd[2],
            high_sd=sd[3],
            short_low_sd=sd[4],
            short_high_sd=sd[5],
        )

    def _scatter(self) -> Array:
        """Standard deviations (6, m) from the scatter between blocks (JCGM 101:2008, 7.9.4 f).

        Ends of a shortest interval sit at a flat minimum and gain with the cube root of the trials
        (J. Kim, D. Pollard, Cube root asymptotics, Ann. Statist. 18, 1990), not with the square root.
        """
        blocks = np.stack(self._blocks)
        h = len(blocks)
        # From few blocks a standard deviation is itself uncertain: as wide as its t interval.
        widen = float(stdtrit(h - 1.0, 0.975) / ndtri(0.975))
        gain = np.array([h**0.5] * 4 + [h ** (1.0 / 3.0)] * 2)[:, None]
        result: Array = blocks.std(axis=0, ddof=1) * (widen / gain)
        return result

    def _formulas(self, spread: Array, moment4: Array, tail: float) -> Array:
        """Standard deviations (6, m) from too few blocks to compare: the asymptotic formulas.

        *Source* of a quantile: √(p(1−p)/n)/f; of a standard deviation: √((m4 − s⁴)/n)/(2s). Those of the
        shortest interval have none; NaN.
        """
        n = np.maximum(self._power[0], 1.0)
        result = np.full((6, len(spread)), np.nan)
        result[0] = spread / np.sqrt(n)
        positive = np.where(spread > 0, spread, 1.0)
        result[1] = np.sqrt(np.maximum(moment4 - spread**4, 0.0) / n) / (2.0 * positive)
        for j, histogram in enumerate(self._histograms):
            if histogram is not None:
                error = np.sqrt(tail * (1.0 - tail) / n[j])
                result[2:4, j] = [error / histogram.density(p) for p in (tail, 1.0 - tail)]
        return result
