"""Repeated rows of a point: the whole series through the chain, and the scatter of its mean."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.chain import Inputs, evaluate
from tapband.nouns.campaign import Campaign, Points, Rows
from tapband.probability.series import batch_covariance
from tapband.reduction.corrections import Corrected
from tapband.reduction.live_sets import LiveSet

Array = NDArray[np.float64]


def coefficient_series(
    campaign: Campaign, corrected: Corrected, sets: Sequence[LiveSet], raw: Points, outputs: int
) -> list[Array]:
    """Coefficients of every row, a series (rows, m) a point, each row with its own stream and angle.

    The corrections of a point are those of its mean readings.
    """
    assert raw.blocks is not None
    owner = np.empty(len(raw.names), dtype=np.int64)
    for k, one in enumerate(sets):
        owner[one.points] = k
    series = [np.empty((int(count), outputs)) for count in raw.counts]
    filled = np.zeros(len(raw.names), dtype=np.int64)
    for block in raw.blocks():
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


def sample_scatter(
    campaign: Campaign, corrected: Corrected, sets: Sequence[LiveSet], raw: Points, outputs: int
) -> tuple[Array, Array, tuple[str, ...]]:
    """A factor (P, m, m) of the covariance of each point's mean coefficients, batches (P,), and warnings."""
    series = coefficient_series(campaign, corrected, sets, raw, outputs)
    factor, batches = np.zeros((len(series), outputs, outputs)), np.zeros(len(series))
    said: list[str] = []
    for point, values in enumerate(series):
        if len(values) < 2:
            continue
        covariance, batches[point], notes = batch_covariance(values)
        factor[point] = _factor(covariance)
        said += [f"{raw.keys[point]}: {note}" for note in notes]
    return factor, batches, tuple(said)


def _factor(covariance: Array) -> Array:
    """A with A Aᵀ = covariance (m, m); rows and columns that are not numbers give zero."""
    usable = np.where(np.isfinite(covariance), covariance, 0.0)
    values, vectors = np.linalg.eigh(usable)
    return np.asarray(vectors * np.sqrt(np.maximum(values, 0.0)))
