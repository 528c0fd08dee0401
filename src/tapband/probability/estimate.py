"""From trials to numbers: moments and ends with numerical standard deviations, and how far from the tolerance."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.probability.controls import Regression
from tapband.probability.coverage import tolerance
from tapband.probability.curve import FRACTIONS, Curve, Frame
from tapband.probability.ends import solve
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
    scatter: Array
    """Root mean square (Pb, m) of what the linear model leaves of an output."""
    failed: Mask
    """Rows in which a trial was refused or the ends could not be found."""
    trials: int

    def excess(self, linear_u: Array) -> Array:
        """Twice the largest numerical standard deviation, its own doubt added, over δ (Pb, m)."""
        n = self.numbers
        delta = tolerance(np.where(np.isnan(n.u), linear_u, n.u))
        claimed = np.stack([n.mean_sd, n.u_sd, n.low_sd, n.high_sd])
        exists = ~np.isnan(np.stack([n.mean + n.mean_sd, n.u + n.u_sd, n.low, n.high]))
        cautious = np.where(exists, 2.0 * claimed * (1.0 + _CAUTION * self.doubt), 0.0)
        worst = cautious.max(axis=0)
        return np.where(worst > 0.0, worst / np.where(delta > 0.0, delta, 1e-300), 0.0)


def estimated(
    model: Model, points: range, rows: Mask, out: tuple[int, ...], trials: Trials, level: float
) -> Estimate:
    """Numbers of ``rows`` (Pb, m) from trials in which the families ``out`` were integrated out."""
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
    square = over.mean(trials.square)
    variance = model.variance(points, every) + square - shift * shift
    u = np.sqrt(np.where(variance > 0.0, variance, np.nan))
    influence = trials.square - (2.0 * shift)[..., None] * trials.shift
    square_sd, u_doubt = over.spread(influence)
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        ends = solve(Curve(frame=frame, smoothing=trials.smoothing, over=over), shift)
    exists = [model.moments(point, out) for point in points]
    means, spreads = np.array([e.mean for e in exists]), np.array([e.u for e in exists])
    mean_scatter, u_scatter = (
        np.array([e.mean_scatter for e in exists]),
        np.array([e.u_scatter for e in exists]),
    )
    numbers = {
        "mean": np.where(means, frame.origin + shift, np.nan),
        "u": np.where(spreads, u, np.nan),
        "mean_sd": np.where(mean_scatter, mean_sd, np.nan),
        "u_sd": np.where(u_scatter, square_sd / (2.0 * np.where(u > 0.0, u, 1.0)), np.nan),
        **{name: getattr(ends, name) for name in NAMES if hasattr(ends, name)},
    }
    lost = np.isnan(u) & spreads & np.isfinite(model.variance(points, every))
    return Estimate(
        numbers=Numbers(**{name: np.where(rows, value, np.nan) for name, value in numbers.items()}),
        doubt=np.stack([mean_doubt, u_doubt, ends.doubt, ends.doubt]),
        scatter=trials.scatter,
        failed=trials.refused | (rows & (~ends.settled | lost)),
        trials=trials.shift.shape[-1],
    )


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
        scatter=np.max([part.scatter for part in parts], axis=0),
        failed=np.any([part.failed for part in parts], axis=0),
        trials=int(counts.sum()),
    )
