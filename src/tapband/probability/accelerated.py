"""Monte Carlo that needs hundreds of trials where plain Monte Carlo needs a million.

The problem is nearly linear, so the linear model is an excellent control variate, and its own distribution is
known exactly. What enters linearly, or one direction at least, is integrated out, so no end of an interval is
sampled: F̂(t) = F_L(t) + mean of [P(y ≤ t | drawn) − P(l ≤ t | drawn)].

A pilot tile of each point shows how many trials its tolerance needs; if the pilot itself does not suffice,
fresh trials are drawn, so that the decision leaves no mark on the result. Where nothing is gained (an output
at its minimum, trials refused, nothing to integrate out) the point falls back to plain trials.
"""

from __future__ import annotations

from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from itertools import groupby

import numpy as np
from numpy.typing import NDArray

from tapband.probability import plain
from tapband.probability.block import Block, process
from tapband.probability.coverage import ROUNDING
from tapband.probability.model import Model
from tapband.probability.outcome import NAMES, Numbers, Outcome
from tapband.probability.strategy import Choice, choices

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

POINTS = 64
"""Most points done together."""


def run(model: Model, plan: plain.Plan, progress: plain.Progress | None = None) -> dict[int, Outcome]:
    """Outcome of every point with ``plan.fixed`` trials, or until the tolerance of JCGM 101 is met."""
    chosen = choices(model)
    blocks = list(_blocks(chosen))
    found: dict[int, Outcome] = {}
    left: dict[int, Mask] = {}
    for points, block in zip(blocks, _in_order(model, blocks, chosen, plan), strict=True):
        for place, point in enumerate(points):
            found[point] = _outcome(block, place)
            if block.plain[place].any():
                left[point] = block.plain[place]
        if progress is not None:
            progress(points.stop, len(chosen) + len(left))
    left = {point: rows for point, rows in left.items() if not _still(model, point, rows, plan, found)}
    if left:
        told = None if progress is None else _after(progress, len(chosen), len(left))
        for point, outcome in plain.run_points(model, list(left), plan, told, left).items():
            found[point] = _merged(found[point], outcome, left[point])
    return found


def _still(model: Model, point: int, rows: Mask, plan: plain.Plan, found: dict[int, Outcome]) -> bool:
    """Whether all that is left of a point does not move beyond rounding in one block of trials; then that is it."""
    if np.any(rows & model.live[point]) or plan.fixed is not None:
        return False
    block = plain.run_points(model, [point], replace(plan, fixed=plan.size, threads=1))[point]
    width = np.nan_to_num(block.numbers.short_high - block.numbers.short_low)
    scale = np.nanmax(np.abs(model.estimate[point]) + model.u[point])
    if np.any(rows & ~(width <= ROUNDING * scale)):
        return False
    found[point] = _merged(found[point], replace(block, reached=np.ones_like(rows)), rows)
    return True


def _in_order(model: Model, blocks: list[range], chosen: list[Choice], plan: plain.Plan) -> Iterator[Block]:
    """Results of the blocks in their order, whoever finishes first."""
    if min(plan.threads, len(blocks)) <= 1:
        yield from (process(model, points, chosen, plan) for points in blocks)
        return
    with ThreadPoolExecutor(plan.threads) as pool:
        yield from pool.map(lambda points: process(model, points, chosen, plan), blocks)


def _blocks(chosen: list[Choice]) -> Iterator[range]:
    """Consecutive points done the same way, few enough to stay in cache."""
    start = 0
    for _, same in groupby(chosen, key=lambda choice: (choice.out, choice.normal)):
        stop = start + sum(1 for _ in same)
        for first in range(start, stop, POINTS):
            yield range(first, min(first + POINTS, stop))
        start = stop


def _outcome(block: Block, place: int) -> Outcome:
    """One point of a block."""
    numbers = {name: block.numbers[name][place] for name in NAMES}
    return Outcome(
        numbers=Numbers(**numbers),
        trials=block.trials[place],
        refused=0,
        reached=block.reached[place],
        method="+".join(sorted(block.methods[place])) or "integrated",
    )


def _merged(first: Outcome, second: Outcome, rows: Mask) -> Outcome:
    """The second outcome in ``rows``, the first elsewhere."""
    numbers = {
        name: np.where(rows, getattr(second.numbers, name), getattr(first.numbers, name)) for name in NAMES
    }
    methods = {*first.method.split("+"), "plain"} if not np.all(rows) else {"plain"}
    return replace(
        second,
        numbers=Numbers(**numbers),
        trials=np.where(rows, second.trials, first.trials),
        reached=np.where(rows, second.reached, first.reached),
        method="+".join(sorted(methods)),
    )


def _after(progress: plain.Progress, points: int, left: int) -> plain.Progress:
    """Progress of the plain trials of the points left, counted behind all points."""
    return lambda done, total: progress(points + left * done // max(total, 1), points + left)
