"""Plain Monte Carlo (JCGM 101:2008, clause 7): draw every latent, evaluate, count. The reference engine.

Memory is bounded: a chunk of trials at a time, one block's values for its own quantiles, counts for the
whole. Threads take blocks of trials; results are combined, and the decision to stop is taken, in the order
of the blocks, so that neither threads nor the points beside one change its row.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from math import ceil

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Problem
from tapband.probability.draws import TILE, Tape
from tapband.probability.model import Model
from tapband.probability.outcome import Outcome
from tapband.probability.tally import Block, Tally

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
Progress = Callable[[int, int], None]

CHUNK = 500
"""Trials evaluated at once: values of 60 taps stay in cache, and below the size that is given back at once."""
POINTS = 8
"""Points that share a tape."""
CAP = 2_000_000
"""Trials after which an adaptive run gives up, and says so."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """How plain trials are run: ``fixed`` trials, or (None) until the tolerance is met or ``cap`` is."""

    level: float
    seed: int
    fixed: int | None = None
    cap: int = CAP
    threads: int = 1

    @property
    def size(self) -> int:
        """Trials of a block, max(10⁴, 100/(1 − p)) in whole tiles (JCGM 101:2008, 7.9.4 a)."""
        return TILE * max(1, ceil(100.0 / (1.0 - self.level) / TILE - 1e-9))

    @property
    def blocks(self) -> int:
        """Most blocks that may be needed."""
        return ceil((self.cap if self.fixed is None else self.fixed) / self.size)

    def count(self, index: int) -> int:
        """Trials of a block; the last of a fixed number may be short."""
        return self.size if self.fixed is None else min(self.size, self.fixed - index * self.size)


def run_points(
    model: Model,
    points: Sequence[int],
    plan: Plan,
    progress: Progress | None = None,
    rows: Mapping[int, Mask] | None = None,
) -> dict[int, Outcome]:
    """Outcome of each of ``points``; only the outputs ``rows[point]`` (m,) decide when to stop."""
    found: dict[int, Outcome] = {}
    with ThreadPoolExecutor(plan.threads) as pool:
        for start in range(0, len(points), POINTS):
            group = list(points[start : start + POINTS])
            said = _Said(progress, start, len(group), len(points), plan.blocks)
            margin = 1.0
            while group:
                tallies = {p: Tally(model, p, plan.level, margin, (rows or {}).get(p)) for p in group}
                _fill(model.problem, tallies, plan, pool, said)
                found.update((p, tally.outcome()) for p, tally in tallies.items())
                group = [p for p, tally in tallies.items() if tally.clipped]
                margin *= 8.0
    return found


@dataclass(frozen=True, slots=True)
class _Said:
    """Progress of one group of points among all, in blocks."""

    progress: Progress | None
    start: int
    group: int
    points: int
    blocks: int

    def __call__(self, done: int) -> None:
        if self.progress is not None:
            self.progress(self.start * self.blocks + self.group * done, self.points * self.blocks)


def _fill(
    problem: Problem, tallies: dict[int, Tally], plan: Plan, pool: ThreadPoolExecutor, said: _Said
) -> None:
    """Run blocks, a batch of one a thread, until every tally is settled or no block is left."""
    active = list(tallies)
    for first in range(0, plan.blocks, plan.threads):
        batch = range(first, min(first + plan.threads, plan.blocks))
        jobs = [pool.submit(_block, problem, tuple(active), plan, index) for index in batch]
        for job in jobs:
            for point, block in job.result().items():
                # A block drawn ahead of the decision to stop is dropped.
                if plan.fixed is not None or not tallies[point].settled:
                    tallies[point].add(block)
        if plan.fixed is None:
            active = [p for p in active if not tallies[p].settled]
        said(batch[-1] + 1 if active else plan.blocks)
        if not active:
            return


def _block(problem: Problem, points: Sequence[int], plan: Plan, index: int) -> dict[int, Block]:
    """Block ``index`` of each point: its values of each output sorted, NaN left out and counted."""
    count, first = plan.count(index), index * (plan.size // TILE)
    parts = [
        sample_tile(problem, points, plan.seed, first + k, min(TILE, count - k * TILE))
        for k in range(ceil(count / TILE))
    ]
    values = parts[0] if len(parts) == 1 else np.concatenate(parts, axis=1)
    live = np.isfinite(problem.estimate)
    result: dict[int, Block] = {}
    for place, point in enumerate(points):
        columns = np.ascontiguousarray(values[place].T)
        good = np.isfinite(columns)
        columns[~good] = np.nan
        columns.sort(axis=-1)
        kept = np.where(live[point], good.sum(axis=-1), 0)
        ordered = tuple(column[:n] for column, n in zip(columns, kept, strict=True))
        refused = int((~good[live[point]]).any(axis=0).sum())
        result[point] = Block(ordered=ordered, trials=count, refused=refused)
    return result


def sample_tile(problem: Problem, points: Sequence[int], seed: int, tile: int, count: int = TILE) -> Array:
    """y (Pb, count, m): first ``count`` joint draws of a tile; shared latents are shared; NaN: refused."""
    tape = Tape(problem.families, points, seed, tile, CHUNK)
    values = np.empty((len(points), count, len(problem.outputs)))
    for start in range(0, count, CHUNK):
        tape.advance()
        stop = min(start + CHUNK, count)
        for place, point in enumerate(points):
            # One point at a time and whole chunks: arrays of one shape reach every matrix product.
            y = problem.evaluate(slice(point, point + 1), tape.of(point))
            values[place, start:stop] = np.broadcast_to(y, (1, CHUNK, values.shape[2]))[0, : stop - start]
    return values
