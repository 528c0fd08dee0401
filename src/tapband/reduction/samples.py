"""Repeated rows of a point: the whole series through the chain, and the scatter of its mean."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.chain import Inputs, evaluate
from tapband.nouns.campaign import Campaign, Points, Rows
from tapband.probability.series import SeriesMean, series_mean
from tapband.reduction.corrections import Corrected
from tapband.reduction.live_sets import LiveSet

Array = NDArray[np.float64]
FULL_SCALE_SLACK = 1e-4
"""A reading this close to full scale, relatively, is at it."""
NAMED = 4
"""Clipped taps that are named; the others are counted."""


def coefficient_series(
    campaign: Campaign,
    corrected: Corrected,
    sets: Sequence[LiveSet],
    raw: Points,
    outputs: int,
    clipped: Clipped,
) -> list[Array]:
    """Coefficients of every row, a series (rows, m) a point, each row with its own stream and angle.

    The corrections of a point are those of its mean readings. Samples at full scale are counted on the way.
    """
    assert raw.blocks is not None
    owner = np.empty(len(raw.names), dtype=np.int64)
    for k, one in enumerate(sets):
        owner[one.points] = k
    series = [np.empty((int(count), outputs)) for count in raw.counts]
    filled = np.zeros(len(raw.names), dtype=np.int64)
    for block in raw.blocks():
        clipped.count(block)
        y = np.empty((block.point.size, outputs))
        for k, one in enumerate(sets):
            rows = np.flatnonzero(owner[block.point] == k)
            if rows.size:
                y[rows] = _evaluate(one, block, rows, corrected, raw)
        for point in np.unique(block.point):
            mine = y[block.point == point]
            series[point][filled[point] : filled[point] + len(mine)] = mine
            filled[point] += len(mine)
    return series


def _evaluate(one: LiveSet, block: Rows, rows: NDArray[np.int64], corrected: Corrected, raw: Points) -> Array:
    point = block.point[rows]
    moved = corrected.points
    live = one.equation.quadrature.live
    reading = block.readings[rows] + (moved.readings - raw.readings)[point]
    shift = {name: value[point, None] for name, value in corrected.shifts.items()}
    inputs = Inputs(
        reading=np.where(live, reading, 0.0)[:, None],
        alpha=(block.alpha[rows] + (moved.alpha - raw.alpha)[point])[:, None],
        channels={
            k: (v[rows] + (moved.channels[k] - raw.channels[k])[point])[:, None]
            for k, v in block.channels.items()
        },
        extra=corrected.extra[point, None],
        mach_shift=shift.get("mach_shift"),
        q_shift=shift.get("q_shift"),
        added=corrected.added[point, None],
    )
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(evaluate(one.equation, inputs)[:, 0])


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Scatter:
    """What repeated rows say of each point's mean coefficients."""

    factor: Array
    """(P, m, m) A with A Aᵀ the covariance of the mean; zero where a point has one row."""
    batches: Array
    """(P,) number of batches, 0 where there are none."""
    series: tuple[SeriesMean | None, ...]
    """(P,)."""
    warnings: tuple[str, ...]


def sample_scatter(
    campaign: Campaign, corrected: Corrected, sets: Sequence[LiveSet], raw: Points, outputs: tuple[str, ...]
) -> Scatter:
    """Batch means of the coefficients of every point with several rows, and what to warn of."""
    count = len(outputs)
    clipped = Clipped.of(campaign, raw)
    series = coefficient_series(campaign, corrected, sets, raw, count, clipped)
    factor, batches = np.zeros((len(series), count, count)), np.zeros(len(series))
    means: list[SeriesMean | None] = []
    said: list[str] = []
    for point, values in enumerate(series):
        if len(values) < 2:
            means.append(None)
            continue
        mean = series_mean(values)
        means.append(mean)
        batches[point] = mean.batches
        factor[point] = _factor(mean.covariance)
        notes = [*mean.notes, *_drift(mean, outputs), *clipped.notes(point, len(values))]
        said += [f"{raw.keys[point]}: {note}" for note in notes]
    return Scatter(factor=factor, batches=batches, series=tuple(means), warnings=tuple(said))


def _drift(mean: SeriesMean, outputs: tuple[str, ...]) -> list[str]:
    """A coefficient that moves along the record: its scatter is not that of one condition."""
    named = [
        f"{outputs[j]} by {mean.drift[j]:+.2g}"
        for j in np.flatnonzero(mean.drifts)
        if "_ref" not in outputs[j]
    ]
    return [f"drift over the record: {', '.join(named)}; its mean is not of one condition"] if named else []


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Clipped:
    """Samples at full scale, counted by point and tap or channel while they stream by."""

    names: tuple[str, ...]
    full_scale: Array
    """(n + c,) [Pa], NaN where unknown."""
    channels: tuple[str, ...]
    counts: NDArray[np.int64]
    """(P, n + c)."""

    @classmethod
    def of(cls, campaign: Campaign, raw: Points) -> Clipped:
        """Nothing counted yet."""
        channels = tuple(name for name in campaign.channels if name in raw.channels)
        scales = [campaign.channels[name].full_scale for name in channels]
        usable = np.where(campaign.taps.excluded, np.nan, campaign.taps.full_scale)
        names = (*campaign.taps.names, *channels)
        return cls(
            names=names,
            full_scale=np.concatenate([usable, np.array(scales, dtype=np.float64)]),
            channels=channels,
            counts=np.zeros((len(raw.names), len(names)), dtype=np.int64),
        )

    def count(self, block: Rows) -> None:
        """Add a block of rows."""
        read = np.column_stack([block.readings, *(block.channels[name] for name in self.channels)])
        with np.errstate(invalid="ignore"):
            at = np.abs(read) >= self.full_scale * (1.0 - FULL_SCALE_SLACK)
        if at.any():
            np.add.at(self.counts, block.point, at)

    def notes(self, point: int, samples: int) -> list[str]:
        """What to say of one point."""
        hit = np.flatnonzero(self.counts[point])
        if not hit.size:
            return []
        named = [f"{self.names[i]} in {self.counts[point, i]}" for i in hit[:NAMED]]
        more = f" and {hit.size - NAMED} more" if hit.size > NAMED else ""
        return [
            f"clipped at full scale, of {samples} samples: {', '.join(named)}{more}; "
            "its mean and its scatter are cut off"
        ]


def _factor(covariance: Array) -> Array:
    """A with A Aᵀ = covariance (m, m); rows and columns that are not numbers give zero."""
    usable = np.where(np.isfinite(covariance), covariance, 0.0)
    values, vectors = np.linalg.eigh(usable)
    return np.asarray(vectors * np.sqrt(np.maximum(values, 0.0)))
