"""One block of points through the accelerated engine: pilots, decision, fresh trials where needed.

Every decision about a point is taken from its own numbers, so no row depends on the block it is in.
"""

from __future__ import annotations

from collections.abc import Callable, Hashable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.probability.coverage import tolerance
from tapband.probability.curve import FRACTIONS
from tapband.probability.draws import FINE
from tapband.probability.estimate import Estimate, Sketch, averaged
from tapband.probability.line_trials import line
from tapband.probability.model import Model
from tapband.probability.outcome import NAMES
from tapband.probability.plain import Plan
from tapband.probability.probes import probe, shape_error, shape_weight
from tapband.probability.smoothing import TableBase
from tapband.probability.strategy import Choice, Direction, direction, fallback
from tapband.probability.trials import Tiles, Trials, integrated

Array = NDArray[np.float64]
Counts = NDArray[np.int64]
Mask = NDArray[np.bool_]
Sampler = Callable[[range, Mask, Tiles], Trials]

TILE = 512
"""Trials of a tile after the pilot."""
BATCH = 65_536
"""Most trials of a point held at once; more come in batches whose estimates are averaged."""
TOGETHER = 16_384
"""Most trials held at once for points done together."""
LADDER = (1, 2, 3, 4, 6, 8, 12, 16, 24, 32, 48, 64, 96, 128, 192, 256, 384, 512, 768, 1024, 1536, 2048)
"""Numbers of tiles that a point may get, so that neighbours often get the same."""
_WARY = 16.0
"""Fewest tiles where a probe saw what the pilot did not."""
_DEAR = 4.0
"""Tiles beyond which a line is tried beside integrating out."""
_COST = {"integrated": 3.0, "line": 9.0}
"""Cost of a trial in plain ones, roughly: it decides which way is the cheaper."""
_PLAIN_ENDS = 28.5
"""(2 √(0.025 · 0.975)/φ(1.96))²: plain trials times (δ/u)² for the ends of a normal 95 % interval."""
_PLAIN_LEAST = 1e5
_POOR = 1.5
"""Excess by the outlook beyond which a pilot is not carried to its ends."""
_MARGIN = 1.4
"""Trials beyond those that an estimate asks for, so that the next rarely asks again."""
_ROUNDS = 6
_HALF = 0.5
"""Share of δ below which nothing that a probe sees can matter."""
_HIDDEN = 20.0
"""The farthest probe sees up to 14 times the pilot's root mean square of a smooth difference (a cubic)."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Block:
    """Results (Pb, m) so far; ``plain`` rows are left to plain trials."""

    points: range
    numbers: dict[str, Array]
    trials: Counts
    reached: Mask
    plain: Mask
    methods: list[set[str]]

    @classmethod
    def empty(cls, model: Model, points: range) -> Block:
        """Nothing done yet; outputs that hardly move are left to plain trials."""
        where = slice(points.start, points.stop)
        shape = model.estimate[where].shape
        return cls(
            points=points,
            numbers={name: np.full(shape, np.nan) for name in NAMES},
            trials=np.zeros(shape, dtype=np.int64),
            reached=np.isnan(model.estimate[where]),
            plain=np.isfinite(model.estimate[where]) & ~model.live[where],
            methods=[set() for _ in points],
        )

    def places(self, points: range) -> slice:
        """Where some points stand in the block."""
        return slice(points.start - self.points.start, points.stop - self.points.start)

    def store(self, model: Model, points: range, rows: Mask, estimate: Estimate, method: str) -> None:
        """Keep an estimate in ``rows`` of ``points``."""
        place = self.places(points)
        for name in NAMES:
            self.numbers[name][place][rows] = getattr(estimate.numbers, name)[rows]
        self.trials[place][rows] = estimate.trials
        met = estimate.excess(model.u[points.start : points.stop]) < 1.0
        self.reached[place][rows] = met[rows]
        for row, some in enumerate(rows):
            if some.any():
                self.methods[place.start + row].add(method)


def process(model: Model, points: range, chosen: Sequence[Choice], plan: Plan) -> Block:
    """All rows of a block of points: a pilot each way, then the cheaper way to the end."""
    block = Block.empty(model, points)
    own = _checked(model, points, [chosen[point] for point in points], plan)
    rows = np.array([choice.integrated for choice in own], dtype=np.bool_)
    hard = np.array([choice.line for choice in own], dtype=np.bool_)
    far, rough = _probed(model, block, rows | hard)
    ways: list[tuple[_Stage, range]] = []
    need = {method: np.full(rows.shape, np.inf) for method in _COST}
    for some in runs(points, [(choice.out, choice.normal) for choice in own]):
        place = block.places(some)
        if (rows & ~block.plain)[place].any():
            sampler = _integrating(model, own[place.start], plan.level)
            stage = _Stage(model, plan, block, "integrated", sampler, own[place.start].out, far, rough)
            need["integrated"][place] = stage.pilot(some, (rows & ~block.plain)[place])
            ways.append((stage, some))
    hard = (hard | (rows & (need["integrated"] > _DEAR))) & ~block.plain
    lines = [direction(model, p, row) if row.any() else None for p, row in zip(points, hard, strict=True)]
    along = {p: way for p, way in zip(points, lines, strict=True) if way is not None}
    for some in runs(points, [None if way is None else way.key for way in lines]):
        if some.start in along:
            stage = _Stage(model, plan, block, "line", _lining(model, along), (), far, rough)
            place = block.places(some)
            need["line"][place] = stage.pilot(some, hard[place])
            ways.append((stage, some))
    _finish(block, ways, need, (rows | hard) & ~block.plain)
    return block


def _finish(block: Block, ways: list[tuple[_Stage, range]], need: dict[str, Array], rows: Mask) -> None:
    """Fresh trials for rows whose pilot did not suffice, the cheaper way; none is cheap enough: plain."""
    pending = rows & ~np.any([tiles == 0.0 for tiles in need.values()], axis=0)
    costs = {method: tiles * _COST[method] for method, tiles in need.items()}
    least = np.min(list(costs.values()), axis=0)
    block.plain[pending & np.isinf(least)] = True
    pending &= np.isfinite(least)
    for stage, points in ways:
        place = block.places(points)
        mine = (pending & (costs[stage.method] <= least))[place]
        if mine.any():
            stage.finish(points, mine, need[stage.method][place])


def runs(points: range, keys: Sequence[Hashable]) -> Iterator[range]:
    """Consecutive points of equal key."""
    start = 0
    for stop in range(1, len(points) + 1):
        if stop == len(points) or keys[stop] != keys[start]:
            yield points[start:stop]
            start = stop


def _checked(model: Model, points: range, own: list[Choice], plan: Plan) -> list[Choice]:
    """Choices, with those withdrawn whose law of other shape does not scale as a whole."""
    if own[0].normal or not own[0].out:
        return own
    where = slice(points.start, points.stop)
    rows = np.array([choice.integrated for choice in own], dtype=np.bool_)
    # A twentieth of δ is a tenth of the numerical error that is tolerated.
    room = np.where(rows, 0.05 * tolerance(model.u[where]) / np.where(rows, model.u[where], 1.0), np.inf)
    good: Mask = shape_weight(model, points, own[0].out) < room
    if not good.all():
        error = shape_error(model, points, own[0].out, Tiles(seed=plan.seed, size=FINE, count=FINE))
        good = good | (error < room)
    return [
        choice if fine.all() else fallback(model, point)
        for point, choice, fine in zip(points, own, good, strict=True)
    ]


def _probed(model: Model, block: Block, rows: Mask) -> tuple[Array, Mask]:
    """Largest difference to the linear model far out (Pb, m), and whether that is not smooth.

    Rows that are refused there are left to plain trials.
    """
    far, rough = probe(model, block.points)
    good = rows & np.isfinite(far + rough)
    block.plain[rows & ~good] = True
    u = model.u[block.points.start : block.points.stop]
    return np.where(good, far, 0.0), good & (rough > _HALF * tolerance(u))


def _integrating(model: Model, choice: Choice, level: float) -> Sampler:
    def sample(points: range, rows: Mask, tiles: Tiles) -> Trials:
        if choice.normal:
            return integrated(model, points, rows, choice.out, None, tiles)
        law = model.law(points, rows, choice.out, 0.5 * FRACTIONS[0] * (1.0 - level))
        return integrated(model, points, rows, choice.out, TableBase(law, rows.shape), tiles)

    return sample


def _lining(model: Model, along: dict[int, Direction]) -> Sampler:
    def sample(points: range, rows: Mask, tiles: Tiles) -> Trials:
        return line(model, points, rows, [along[point] for point in points], tiles)

    return sample


@dataclass(frozen=True, slots=True)
class _Stage:
    """One way of smoothing for some points of a block."""

    model: Model
    plan: Plan
    block: Block
    method: str
    sampler: Sampler
    out: tuple[int, ...]
    """Families integrated out."""
    far: Array
    """What the probes saw (Pb, m) of the block, and whether it was not smooth."""
    rough: Mask

    def pilot(self, points: range, rows: Mask) -> Array:
        """Tiles (Pb, m) that rows need beyond the pilot: 0 where it sufficed, inf where plain is cheaper."""
        sketch = self._sketch(points, rows, Tiles(seed=self.plan.seed, size=FINE, count=FINE))
        place = self.block.places(points)
        far, rough = self.far[place], self.rough[place]
        delta = tolerance(self.model.u[points.start : points.stop])
        wary = rows & (rough | ((far > _HIDDEN * sketch.trials.scatter) & (far > _HALF * delta)))
        # Ends are not worth finding where their outlook is poor; each row decides for itself.
        poor = wary | (sketch.excess > _POOR)
        need = self._need(points, FINE, sketch.excess, sketch.trials.refused | sketch.lost)
        if self.plan.fixed is None and np.any(rows & ~poor):
            got = sketch.estimate()
            excess = got.excess(self.model.u[points.start : points.stop])
            need = np.where(poor, need, self._need(points, FINE, excess, got.failed))
            self.block.store(self.model, points, rows & ~poor & (need == 0.0), got, self.method)
        least = np.where(wary, _WARY, np.where(poor, 1.0, 0.0)) if self.plan.fixed is None else 0.0
        return np.where(rows, np.maximum(need, least), np.inf)

    def finish(self, points: range, rows: Mask, tiles: Array) -> None:
        """Fresh trials until ``rows`` are good enough, starting from the numbers of ``tiles`` (Pb, m)."""
        pending = rows.copy()
        fixed = self.plan.fixed
        if fixed is not None:
            self._fixed(points, pending, fixed)
            return
        need = _rungs(np.where(pending, tiles, 0.0))
        for _ in range(_ROUNDS):
            for some in _together(points, need):
                inside = slice(some.start - points.start, some.stop - points.start)
                got = self._batches(some, pending[inside], int(need[inside][0]) * TILE)
                excess = got.excess(self.model.u[some.start : some.stop])
                more = np.where(pending[inside], self._need(some, got.trials, excess, got.failed), 0.0)
                good = pending[inside] & (more == 0.0)
                self.block.store(self.model, some, good, got, self.method)
                self.block.plain[self.block.places(some)] |= pending[inside] & np.isinf(more)
                pending[inside] &= ~good & np.isfinite(more)
                need[inside] = _rungs(np.where(pending[inside], more, 0.0))
            if not pending.any():
                return
        self.block.plain[self.block.places(points)] |= pending

    def _need(self, points: range, trials: int, excess: Array, failed: Mask) -> Array:
        """Tiles (Pb, m) that rows need, judged by some trials: 0 where these suffice, inf where plain is cheaper.

        Where the number of trials is fixed, any that do not fail are better spent here than plainly.
        """
        u = self.model.u[points.start : points.stop]
        tiles = _MARGIN * trials * excess * excess / TILE
        tiles = np.where(failed, np.inf, np.maximum(tiles, 1e-9))
        if self.plan.fixed is not None:
            return tiles
        ratio = u / np.where(u > 0.0, tolerance(u), 1.0)
        plain = np.maximum(_PLAIN_ENDS * ratio * ratio, _PLAIN_LEAST)
        dear = ~(tiles * (TILE * _COST[self.method]) < plain) | (tiles > LADDER[-1])
        return np.where(~failed & (excess < 1.0), 0.0, np.where(dear, np.inf, tiles))

    def _fixed(self, points: range, pending: Mask, count: int) -> None:
        """The same number of trials for all rows that are left."""
        for some in _together(points, np.where(pending.any(axis=1), -(-count // TILE), 0)):
            inside = slice(some.start - points.start, some.stop - points.start)
            got = self._batches(some, pending[inside], count)
            self.block.plain[self.block.places(some)] |= pending[inside] & got.failed
            self.block.store(self.model, some, pending[inside] & ~got.failed, got, self.method)

    def _batches(self, points: range, rows: Mask, count: int) -> Estimate:
        parts = []
        for start in range(0, count, BATCH):
            size = min(BATCH, count - start)
            tiles = Tiles(seed=self.plan.seed, size=TILE, count=size, first=start // TILE)
            parts.append(self._sketch(points, rows, tiles).estimate())
        return averaged(parts)

    def _sketch(self, points: range, rows: Mask, tiles: Tiles) -> Sketch:
        trials = self.sampler(points, rows, tiles)
        return Sketch.of(self.model, points, rows, self.out, trials, self.plan.level)


def _rungs(tiles: Array) -> Counts:
    """Whole tiles (Pb,) for the neediest row of each point, on the ladder; 0 where none needs any."""
    most = tiles.max(axis=1, initial=0.0)
    rung = np.minimum(np.searchsorted(LADDER, most), len(LADDER) - 1)
    return np.where(most > 0.0, np.asarray(LADDER)[rung], 0)


def _together(points: range, need: Counts) -> Iterator[range]:
    """Consecutive points that need the same number of tiles, not 0, few enough to hold at once."""
    for some in runs(points, need.tolist()):
        tiles = int(need[some.start - points.start])
        if tiles:
            size = max(1, TOGETHER // (tiles * TILE))
            for start in range(some.start, some.stop, size):
                yield range(start, min(start + size, some.stop))
