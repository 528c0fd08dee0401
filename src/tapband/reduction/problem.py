"""The batch of equations of a campaign as a propagator sees it (:class:`tapband.nouns.problem.Problem`)."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.chain import Equation, Inputs, evaluate, prandtl_glauert, stream_of
from tapband.nouns.problem import Draws, Family
from tapband.reduction.live_sets import LiveSet
from tapband.reduction.loads import Entry, Loaded

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
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
        for equation, rows, where in self._blocks(points):
            with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
                y[where] = evaluate(equation, self._inputs(rows, where, draws))
        return y

    def given(self, points: slice, draws: Draws, out: Sequence[int]) -> tuple[Array, Mapping[int, Array]]:
        """As :meth:`evaluate`, with the variances that the linear families in ``out`` add."""
        trials = max((d.shape[1] for d in draws.values()), default=1)
        size = len(range(*points.indices(len(self.alpha))))
        y = np.empty((size, trials, len(self.outputs)))
        variance = {f: np.empty((size, trials, len(self.outputs))) for f in out}
        for equation, rows, where in self._blocks(points):
            inputs = self._inputs(rows, where, draws)
            with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
                y[where] = evaluate(equation, inputs)
                response = _Response.of(equation, inputs)
                for f in out:
                    variance[f][where] = response.variance(self.loaded[f], rows)
        return y, variance

    def inputs(self, point: int) -> tuple[Equation, Inputs]:
        """Equation and nominal inputs of one point, leading axis 1."""
        rows = np.array([point])
        equation = next(s.equation for s in self.sets if point in s.points)
        return equation, self._inputs(rows, np.array([0]), {})

    def _blocks(self, points: slice) -> Iterator[tuple[Equation, Indices, Indices]]:
        """Equation, point indices, and their places in the block, a live set at a time."""
        start, stop, _ = points.indices(len(self.alpha))
        for one in self.sets:
            low, high = np.searchsorted(one.points, [start, stop])
            if high > low:
                rows = one.points[low:high]
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


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Response:
    """How the measured integrals answer tap errors at each drawn trial."""

    by_cp: Array
    """(·, ·, 3, n): ∂(cn, ct, cm)/∂Cp_i, the drawn tap locations in it; leading axes broadcast."""
    q: Array
    cos: Array
    sin: Array
    factor: Array | None
    """Prandtl-Glauert factor (Pb, T), None without a rule."""
    edges: Mapping[str, Array]
    outputs: int

    @classmethod
    def of(cls, equation: Equation, inputs: Inputs) -> _Response:
        stream = stream_of(equation, inputs)
        weights = equation.tap_weights
        by_cp = weights[None, None]
        if inputs.shift is not None:
            rule = equation.quadrature
            moved = weights * inputs.shift[..., None, :]
            bent = 0.5 * moved * inputs.shift[..., None, :]
            by_cp = weights - moved @ rule.slope + bent @ rule.curvature
        rows = {"edge_common": equation.edge_common, "edge_loading": equation.edge_loading}
        length = inputs.length if equation.in_lengths else None
        centre = equation.moment_centre + (0.0 if inputs.centre is None else inputs.centre)
        factor = None if equation.compressibility == "none" else prandtl_glauert(equation, stream.mach)
        return cls(
            by_cp=_about(by_cp, centre, length),
            q=stream.q,
            cos=np.cos(inputs.alpha),
            sin=np.sin(inputs.alpha),
            factor=factor,
            outputs=len(equation.outputs),
            edges={k: _about(v[None, None, :, None], centre, length)[..., 0] for k, v in rows.items()},
        )

    def variance(self, loaded: Loaded, rows: Indices) -> Array:
        """Σ_k (∂y/∂ξ_k)² of one linear family, (Pb, T, m)."""
        added = [e for e in loaded.entries if e.slot == "added"]
        if added:
            rest = [e for e in loaded.entries if e.slot != "added"]
            assert not rest, "an error of a coefficient acts on nothing else"
            return np.asarray(np.sum(added[0].load[rows] ** 2, axis=2)[:, None, :])
        count = len(loaded.family.members)
        body = [self._body(entry, count, rows) for entry in loaded.entries]
        parts: Array = body[0] if len(body) == 1 else np.sum(np.broadcast_arrays(*body), axis=0)
        squares = {
            (i, j): np.sum(parts[..., i, :] * parts[..., j, :], axis=-1)
            for i, j in ((0, 0), (1, 1), (2, 2), (0, 1))
        }
        cross = 2.0 * self.sin * self.cos * squares[0, 1]
        lift = self.cos**2 * squares[0, 0] + self.sin**2 * squares[1, 1] - cross
        drag = self.sin**2 * squares[0, 0] + self.cos**2 * squares[1, 1] + cross
        five = [squares[0, 0], squares[1, 1], squares[2, 2], lift, drag]
        measured = np.stack(np.broadcast_arrays(*five), axis=-1)
        if self.factor is None:
            return measured
        return np.concatenate(np.broadcast_arrays(measured, measured * self.factor[..., None] ** 2), axis=-1)

    def _body(self, entry: Entry, count: int, rows: Indices) -> Array:
        """∂(cn, ct, cm)/∂ξ (·, ·, 3, G) of one entry."""
        load = entry.load[rows]
        if not entry.on_taps:
            part = np.zeros((1, 1, 1, count))
            part[..., entry.member[0]] = 1.0
            return np.asarray(self.edges[entry.slot][..., None] * load[:, None, None, None] * part)
        if entry.slot == "reading":
            scaled = self.by_cp * (load[:, None, None, :] / self.q[..., None, None])
        else:
            scaled = self.by_cp * load[:, None, None, :]
        if count == entry.member.size and np.array_equal(entry.member, np.arange(count)):
            return np.asarray(scaled)
        gather = (entry.member[:, None] == np.arange(count)).astype(np.float64)
        return np.asarray(scaled @ gather)


def _about(rows: Array, centre: Array | float, length: Array | None) -> Array:
    """cn, ct, cm about the moment centre (…, 3, k) from cn, ct, cm₀ rows (…, 3, k)."""
    cn, ct, cm0 = rows[..., 0, :], rows[..., 1, :], rows[..., 2, :]
    if length is not None:
        g = (1.0 / (1.0 + length))[..., None]
        cn, ct, cm0 = cn * g, ct * g, cm0 * g * g
    moved = centre[..., None] if isinstance(centre, np.ndarray) else centre
    return np.stack(np.broadcast_arrays(cn, ct, cm0 + moved * cn), axis=-2)
