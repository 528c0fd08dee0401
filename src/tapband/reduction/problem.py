"""The batch of equations of a campaign as a propagator sees it (:class:`tapband.nouns.problem.Problem`)."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.chain import Equation, Inputs, evaluate
from tapband.nouns.problem import Draws, Family
from tapband.reduction.live_sets import LiveSet
from tapband.reduction.loads import Entry, Loaded
from tapband.reduction.response import Response

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
CACHED = 65_536
"""Numbers of one array over points, trials and taps that are worked on at once: 0.5 MB, several of them in cache."""
OPTIONAL = tuple(f.name for f in fields(Inputs) if f.name not in ("reading", "alpha", "channels"))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class CampaignProblem:
    """P test points, m coefficients; inputs at their corrected values, zeros at dead taps."""

    sets: Sequence[LiveSet]
    loaded: Sequence[Loaded]
    reading: Array
    """(P, n)."""
    extra: Array | None
    """(P, n) correction of Cp."""
    alpha: Array
    channels: Mapping[str, Array]
    shifts: Mapping[str, Array]
    """Corrections of derived mach_shift, q_shift (P,)."""
    added: Array
    """(P, m) corrections of coefficients."""
    outputs: tuple[str, ...]
    estimate: Array
    sensitivity: Sequence[Array]

    @property
    def families(self) -> Sequence[Family]:
        """One a source."""
        return [one.family for one in self.loaded]

    @property
    def affine(self) -> NDArray[np.bool_]:
        """A rule that acts on Cp bends the reference coefficients; all others are affine in tap errors."""
        bent = not self.sets[0].equation.on_coefficients
        return np.array([not (bent and name.endswith("_ref")) for name in self.outputs])

    def part(self, points: slice) -> CampaignProblem:
        """The problem of a block of points alone."""
        start, stop, _ = points.indices(len(self.alpha))
        sets = []
        for one in self.sets:
            low, high = np.searchsorted(one.points, [start, stop])
            if high > low:
                sets.append(replace(one, points=one.points[low:high] - start))
        return replace(
            self,
            sets=sets,
            loaded=[one.part(points) for one in self.loaded],
            reading=self.reading[points],
            extra=None if self.extra is None else self.extra[points],
            alpha=self.alpha[points],
            channels={k: v[points] for k, v in self.channels.items()},
            shifts={k: v[points] for k, v in self.shifts.items()},
            added=self.added[points],
            estimate=self.estimate[points],
            sensitivity=[s[points] for s in self.sensitivity],
        )

    def evaluate(self, points: slice, draws: Draws) -> Array:
        """y (Pb, T, m) of a block of points; see :class:`Problem`."""
        trials = max(d.shape[1] for d in draws.values())
        y = np.empty((len(range(*points.indices(len(self.alpha)))), trials, len(self.outputs)))
        for equation, rows, where in self._blocks(points, trials):
            with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
                y[where] = evaluate(equation, self._inputs(rows, where, draws))
        return y

    def given(self, points: slice, draws: Draws, out: Sequence[int]) -> tuple[Array, Mapping[int, Array]]:
        """As :meth:`evaluate`, with the variances that the linear families in ``out`` add."""
        trials = max((d.shape[1] for d in draws.values()), default=1)
        size = len(range(*points.indices(len(self.alpha))))
        y = np.empty((size, trials, len(self.outputs)))
        variance = {f: np.empty((size, trials, len(self.outputs))) for f in out}
        for equation, rows, where in self._blocks(points, trials):
            inputs = self._inputs(rows, where, draws)
            with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
                y[where] = evaluate(equation, inputs)
                added = Response.of(equation, inputs).variances({f: self.loaded[f] for f in out}, rows)
            for f, one in added.items():
                variance[f][where] = one
        return y, variance

    def inputs(self, point: int) -> tuple[Equation, Inputs]:
        """Equation and nominal inputs of one point, leading axis 1."""
        rows = np.array([point])
        equation = next(s.equation for s in self.sets if point in s.points)
        return equation, self._inputs(rows, np.array([0]), {})

    def _blocks(self, points: slice, trials: int) -> Iterator[tuple[Equation, Indices, Indices]]:
        """Equation, point indices, and their places in the block, a few points of a live set at a time."""
        start, stop, _ = points.indices(len(self.alpha))
        few = max(1, CACHED // (trials * self.reading.shape[1]))
        for one in self.sets:
            low, high = np.searchsorted(one.points, [start, stop])
            for first in range(low, high, few):
                rows = one.points[first : min(first + few, high)]
                yield one.equation, rows, rows - start

    def _inputs(self, rows: Indices, where: Indices, draws: Draws) -> Inputs:
        values: dict[str, Array] = {}
        for f, drawn in draws.items():
            mine = drawn if drawn.shape[0] == 1 else drawn[where]
            for entry in self.loaded[f].entries:
                error = _error(entry, mine, rows)
                if entry.slot in values:
                    values[entry.slot] += error
                else:
                    values[entry.slot] = error
        channels = {name: value[rows, None] + values.pop(name, 0.0) for name, value in self.channels.items()}
        for name, value in self.shifts.items():
            values[name] = value[rows, None] + values.get(name, 0.0)
        if self.extra is not None:
            values["extra"] = self.extra[rows, None, :] + values.get("extra", 0.0)
        if np.any(self.added):
            values["added"] = self.added[rows, None, :] + values.get("added", 0.0)
        reading = self.reading[rows, None, :]
        if "reading" in values:
            reading = np.add(reading, values["reading"], out=values.pop("reading"))
        alpha = self.alpha[rows, None] + values.pop("alpha", 0.0)
        return Inputs(
            reading=reading,
            alpha=alpha,
            channels=channels,
            **{slot: values.get(slot) for slot in OPTIONAL},
        )


def _error(entry: Entry, draws: Array, rows: Indices) -> Array:
    """What drawn latents (Pb or 1, T, G) add to the entry's quantity: (Pb, T, n), (Pb, T, m) or (Pb, T)."""
    load = entry.load[rows]
    if entry.slot == "added":
        return np.asarray(np.matmul(draws[..., entry.member], load.transpose(0, 2, 1)))
    if not entry.on_taps:
        return np.asarray(draws[..., entry.member[0]] * load[:, None])
    if draws.shape[2] == 1:
        return np.asarray(draws * load[:, None, :])
    size = entry.member.size
    own = np.array_equal(entry.member, np.arange(size))
    chosen = draws[..., :size] if own else np.take(draws, entry.member, axis=-1)
    return np.asarray(chosen * load[:, None, :])
