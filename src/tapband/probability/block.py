"""One block of points through the accelerated engine: pilot, decision, fresh trials where needed.

Every decision about a point is taken from its own numbers, so no row depends on the block it is in.
"""

from __future__ import annotations

from collections.abc import Callable, Hashable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.probability.coverage import tolerance
from tapband.probability.draws import FINE
from tapband.probability.ends import FRACTIONS
from tapband.probability.estimate import Estimate, averaged, estimated
from tapband.probability.model import Model
from tapband.probability.outcome import NAMES
from tapband.probability.plain import Plan
from tapband.probability.smoothing import NormalBase, TableBase
from tapband.probability.strategy import Choice, Direction, direction, fallback
from tapband.probability.trials import Tiles, Trials, integrated, line, probe, shape_error

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
Counts = NDArray[np.int64]
Sampler = Callable[[range, Mask, Tiles], Trials]

TILE = 512
"""Trials of a tile after the pilot."""
BATCH = 65_536
"""Most trials of a point held at once; more come in batches whose estimates are averaged."""
TOGETHER = 16_384
"""Most trials held at once for points done together."""
LADDER = (1, 2, 3, 4, 6, 8, 12, 16, 24, 32, 48, 64, 96, 128, 192, 256, 384, 512, 768, 1024, 1536, 2048)
"""Numbers of tiles that a point may get, so that neighbours often get the same."""
_WARY = 16
"""Fewest tiles where a probe saw what the pilot did not."""
_COST = {"integrated": 3.0, "line": 6.0}
"""Cost of a trial in plain ones, roughly: it decides when plain trials are the cheaper way."""
_PLAIN_ENDS = 28.5
"""(2 √(0.025 · 0.975)/φ(1.96))²: trials times (δ/u)² for the ends of a 95 % interval."""
_ROUNDS = 6
_HIDDEN = 12.0
"""A probe at 3 standard deviations sees up to 7 times the pilot's root mean square of a smooth difference."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Block:
    """Results (Pb, m) so far; ``plain`` rows are left to plain trials."""

    points: range
    numbers: dict[str, Array]
    trials: NDArray[np.int64]
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
        for methods, some in zip(self.methods[place], rows.any(axis=1), strict=True):
            if some:
                methods.add(method)


def process(model: Model, points: range, chosen: Sequence[Choice], plan: Plan) -> Block:
    """All rows of a block of points."""
    block = Block.empty(model, points)
    own = _checked(model, points, [chosen[point] for point in points], plan)
    for some in runs(points, [(choice.out, choice.normal) for choice in own]):
        first = own[some.start - points.start]
        rows = np.array([own[p - points.start].integrated for p in some], dtype=np.bool_)
        if rows.any():
            sampler = _integrating(model, first, plan.level)
            _Stage(model, plan, block, "integrated", sampler).run(some, rows)
    rows = np.array([choice.line for choice in own], dtype=np.bool_)
    ways = [direction(model, p, row) if row.any() else None for p, row in zip(points, rows, strict=True)]
    for some in runs(points, [None if way is None else way.key for way in ways]):
        place = block.places(some)
        if ways[place.start] is None:
            block.plain[place] |= rows[place]
        else:
            along = {p: way for p, way in zip(points, ways, strict=True) if way is not None}
            _Stage(model, plan, block, "line", _lining(model, along)).run(some, rows[place])
    return block


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
    error = shape_error(model, points, own[0].out, Tiles(seed=plan.seed, size=FINE, count=FINE))
    rows = np.array([choice.integrated for choice in own], dtype=np.bool_)
    # A twentieth of δ is a tenth of the numerical error that is tolerated.
    good = ~rows | (error * model.u[where] < 0.05 * tolerance(model.u[where]))
    return [
        choice if fine else fallback(model, point)
        for point, choice, fine in zip(points, own, good.all(axis=1), strict=True)
    ]


def _integrating(model: Model, choice: Choice, level: float) -> Sampler:
    def sample(points: range, rows: Mask, tiles: Tiles) -> Trials:
        base = NormalBase()
        if not choice.normal:
            law = model.law(points, rows, choice.out, 0.5 * FRACTIONS[0] * (1.0 - level))
            return integrated(model, points, rows, choice.out, TableBase(law, rows.shape), tiles)
        return integrated(model, points, rows, choice.out, base, tiles)

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

    def run(self, points: range, rows: Mask) -> None:
        """Pilot, then fresh trials of as many tiles as each point needs; hopeless rows are left to plain."""
        pending = rows.copy()
        far = self._probed(points, pending)
        pilot = self._estimate(points, pending, Tiles(seed=self.plan.seed, size=FINE, count=FINE))
        delta = tolerance(self.model.u[points.start : points.stop])
        wary = pending & (far > _HIDDEN * pilot.scatter) & (far > 0.1 * delta)
        if self.plan.fixed is not None:
            self._judge(points, pending, wary, pilot, keep=False)
            self._fixed(points, pending, self.plan.fixed)
            return
        need = self._judge(points, pending, wary, pilot)
        for _ in range(_ROUNDS):
            if not pending.any():
                return
            for some in _together(points, need):
                inside = slice(some.start - points.start, some.stop - points.start)
                count = int(need[inside][0]) * TILE
                fresh = self._batches(some, pending[inside], count)
                need[inside] = self._judge(some, pending[inside], wary[inside], fresh)
        self._leave(points, pending)

    def _judge(self, points: range, pending: Mask, wary: Mask, got: Estimate, *, keep: bool = True) -> Counts:
        """Keep rows that are good enough, leave hopeless ones, and say how many tiles the others need (Pb,)."""
        where = slice(points.start, points.stop)
        excess = got.excess(self.model.u[where])
        if keep:
            good = pending & ~got.failed & (excess < 1.0) & (~wary | (got.trials >= _WARY * TILE))
            self.block.store(self.model, points, good, got, self.method)
            pending &= ~good
        wanted = np.maximum(1.15 * got.trials * excess * excess / TILE, np.where(wary, _WARY, 1.0))
        u = self.model.u[where]
        ratio = u / np.where(u > 0.0, tolerance(u), 1.0)
        # Plain trials of the ends of a normal law to 2 sd < δ, and no fewer than ten blocks.
        plain = np.maximum(_PLAIN_ENDS * ratio * ratio, 1e5)
        hopeless = got.failed | ~(wanted * (TILE * _COST[self.method]) < plain) | (wanted > LADDER[-1])
        self._leave(points, pending & hopeless)
        pending &= ~hopeless
        most = np.where(pending, wanted, 0.0).max(axis=1)
        rung = np.minimum(np.searchsorted(LADDER, most), len(LADDER) - 1)
        return np.where(pending.any(axis=1), np.asarray(LADDER)[rung], 0)

    def _fixed(self, points: range, pending: Mask, count: int) -> None:
        """The same number of trials for all rows that are left."""
        for some in _together(points, np.where(pending.any(axis=1), -(-count // TILE), 0)):
            inside = slice(some.start - points.start, some.stop - points.start)
            got = self._batches(some, pending[inside], count)
            self._leave(some, pending[inside] & got.failed)
            self.block.store(self.model, some, pending[inside] & ~got.failed, got, self.method)

    def _leave(self, points: range, rows: Mask) -> None:
        self.block.plain[self.block.places(points)] |= rows

    def _probed(self, points: range, pending: Mask) -> Array:
        """Largest difference to the linear model far out (Pb, m); refused probes leave the row to plain trials."""
        y, linear = probe(self.model, points)
        far = np.abs(y - linear).max(axis=1)
        hidden = pending & ~np.isfinite(far)
        self._leave(points, hidden)
        pending &= ~hidden
        return np.where(pending, far, 0.0)

    def _batches(self, points: range, rows: Mask, count: int) -> Estimate:
        parts = []
        for start in range(0, count, BATCH):
            size = min(BATCH, count - start)
            tiles = Tiles(seed=self.plan.seed, size=TILE, count=size, first=start // TILE)
            parts.append(self._estimate(points, rows, tiles))
        return averaged(parts)

    def _estimate(self, points: range, rows: Mask, tiles: Tiles) -> Estimate:
        return estimated(self.model, points, rows, self.sampler(points, rows, tiles), self.plan.level)


def _together(points: range, need: Counts) -> Iterator[range]:
    """Consecutive points that need the same number of tiles, not 0, few enough to hold at once."""
    for some in runs(points, need.tolist()):
        tiles = int(need[some.start - points.start])
        if tiles:
            size = max(1, TOGETHER // (tiles * TILE))
            for start in range(some.start, some.stop, size):
                yield range(start, min(start + size, some.stop))
