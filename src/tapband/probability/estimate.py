"""From trials to numbers: moments and ends with numerical standard deviations, and how far from the tolerance."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.probability.controls import Regression
from tapband.probability.coverage import tolerance
from tapband.probability.curve import FRACTIONS, Curve, Frame
from tapband.probability.ends import Start, solve
from tapband.probability.model import Model
from tapband.probability.outcome import NAMES, Numbers
from tapband.probability.trials import Trials

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_CAUTION = 2.0
"""Further standard deviations of a claimed standard deviation that are added before it ends the trials."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Estimate:
    """Numbers (Pb, m) from N trials, NaN outside the rows asked for."""

    numbers: Numbers
    doubt: Array
    """(4, Pb, m) relative standard deviations of the claimed ones of mean, u, low, high."""
    failed: Mask
    """Rows in which a trial was refused or the ends could not be found."""
    trials: int

    def excess(self, linear_u: Array) -> Array:
        """How far (Pb, m) the trials fall short of the tolerance; below 1 they do not."""
        n = self.numbers
        claimed = np.stack([n.mean_sd, n.u_sd, n.low_sd, n.high_sd])
        exists = ~np.isnan(np.stack([n.mean + n.mean_sd, n.u + n.u_sd, n.low, n.high]))
        return _excess(claimed, self.doubt, exists, np.where(np.isnan(n.u), linear_u, n.u))


def _excess(claimed: Array, doubt: Array, exists: Mask, u: Array) -> Array:
    """Twice the largest of the claimed standard deviations (4, Pb, m), their own doubt added, over δ (Pb, m)."""
    worst = np.where(exists, 2.0 * claimed * (1.0 + _CAUTION * doubt), 0.0).max(axis=0)
    ratio = np.where(worst > 0.0, worst / np.maximum(tolerance(u), 1e-300), 0.0)
    return np.where(np.isnan(worst), np.inf, ratio)


@dataclass(frozen=True, slots=True, kw_only=True)
class Sketch:
    """Moments of some rows, and what the ends will be worth before they are found."""

    rows: Mask
    trials: Trials
    start: Start
    numbers: dict[str, Array]
    doubt: Array
    """(2, Pb, m), of mean and u."""
    lost: Mask
    """Rows whose variance came out negative."""
    excess: Array
    """As :meth:`Estimate.excess`, by the outlook of the ends."""

    @classmethod
    def of(
        cls, model: Model, points: range, rows: Mask, out: tuple[int, ...], trials: Trials, level: float
    ) -> Sketch:
        """Of ``rows`` (Pb, m), from trials in which the families ``out`` were integrated out."""
        where = slice(points.start, points.stop)
        rows = rows & ~trials.refused
        every = tuple(range(len(model.families)))
        frame = Frame(
            law=model.law(points, rows, every, tail=0.5 * FRACTIONS[0] * (1.0 - level)),
            origin=np.where(rows, model.estimate[where], 0.0),
            u=np.where(rows, model.u[where], 1.0),
            level=level,
        )
        over = Regression(trials.controls)
        shift, (mean_sd, mean_doubt) = over.mean(trials.shift), over.spread(trials.shift)
        linear = model.variance(points, every)
        variance = linear + over.mean(trials.square) - shift * shift
        u = np.sqrt(np.where(variance > 0.0, variance, np.nan))
        square_sd, u_doubt = over.spread(trials.square - (2.0 * shift)[..., None] * trials.shift)
        exists = _Exists.of(model, points, out)
        numbers = {
            "mean": np.where(exists.mean, frame.origin + shift, np.nan),
            "u": np.where(exists.u, u, np.nan),
            "mean_sd": np.where(exists.mean_scatter, mean_sd, np.nan),
            "u_sd": np.where(exists.u_scatter, square_sd / (2.0 * np.where(u > 0.0, u, 1.0)), np.nan),
        }
        with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
            start = Start.of(Curve(frame=frame, smoothing=trials.smoothing, over=over), shift)
            low_sd, high_sd, doubt = start.outlook()
        claimed = np.stack([numbers["mean_sd"], numbers["u_sd"], low_sd, high_sd])
        there = ~np.isnan(claimed[:2] + np.stack([numbers["mean"], numbers["u"]]))
        return cls(
            rows=rows,
            trials=trials,
            start=start,
            numbers=numbers,
            doubt=np.stack([mean_doubt, u_doubt]),
            lost=np.isnan(u) & exists.u & np.isfinite(linear),
            excess=_excess(
                claimed,
                np.stack([mean_doubt, u_doubt, doubt, doubt]),
                np.concatenate([there, np.ones_like(there)]),
                np.where(np.isnan(numbers["u"]), frame.u, numbers["u"]),
            ),
        )

    def estimate(self) -> Estimate:
        """With the ends."""
        with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
            ends = solve(self.start)
        numbers = self.numbers | {name: getattr(ends, name) for name in NAMES if hasattr(ends, name)}
        return Estimate(
            numbers=Numbers(**{name: np.where(self.rows, value, np.nan) for name, value in numbers.items()}),
            doubt=np.concatenate([self.doubt, np.stack([ends.doubt, ends.doubt])]),
            failed=self.trials.refused | (self.rows & (~ends.settled | self.lost)),
            trials=self.trials.shift.shape[-1],
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class _Exists:
    """Which moments (Pb, m) exist, as :class:`tapband.probability.model.Moments`."""

    mean: Mask
    u: Mask
    mean_scatter: Mask
    u_scatter: Mask

    @classmethod
    def of(cls, model: Model, points: range, out: tuple[int, ...]) -> _Exists:
        rows = [model.moments(point, out) for point in points]
        names = ("mean", "u", "mean_scatter", "u_scatter")
        return cls(**{name: np.array([getattr(row, name) for row in rows]) for name in names})


def averaged(parts: Sequence[Estimate]) -> Estimate:
    """One estimate from those of independent batches, weighted by their trials."""
    if len(parts) == 1:
        return parts[0]
    counts = np.array([part.trials for part in parts], dtype=np.float64)
    weights = (counts / counts.sum())[:, None, None]
    numbers = {}
    for name in NAMES:
        values = np.stack([getattr(part.numbers, name) for part in parts])
        if name.endswith("_sd"):
            numbers[name] = np.sqrt(((weights * values) ** 2).sum(axis=0))
        else:
            numbers[name] = (weights * values).sum(axis=0)
    return Estimate(
        numbers=Numbers(**numbers),
        doubt=np.stack([part.doubt for part in parts]).mean(axis=0) / np.sqrt(len(parts)),
        failed=np.any([part.failed for part in parts], axis=0),
        trials=int(counts.sum()),
    )
