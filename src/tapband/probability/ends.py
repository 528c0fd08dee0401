"""Ends of coverage intervals from F̂, with the numerical standard deviations of its averages carried through."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from tapband.probability.curve import FRACTIONS, Curve, Seen, Side

Array = NDArray[np.float64]

_SHORTEST = 32
"""Probabilities tried for the shortest interval."""
_STEPS = 8
_SHORT_STEPS = 3


@dataclass(frozen=True, slots=True, kw_only=True)
class Ends:
    """Ends (Pb, m) and their numerical standard deviations."""

    low: Array
    high: Array
    short_low: Array
    short_high: Array
    low_sd: Array
    high_sd: Array
    short_low_sd: Array
    """NaN, as for the other end, where the density is flat: many intervals are as short."""
    short_high_sd: Array
    doubt: Array
    """Relative standard deviation (Pb, m) of the claimed standard deviations of low and high."""
    settled: NDArray[np.bool_]
    """False where the search failed: the output is too unlike its linear model."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Start:
    """Where a search begins: nodes (5, Pb, m) of both tails, and what trials say at the middle ones."""

    curve: Curve
    left: Array
    right: Array
    low: tuple[Array, Array]
    high: tuple[Array, Array]

    @classmethod
    def of(cls, curve: Curve, shift: Array) -> Start:
        """``shift`` (Pb, m) from the ends of the linear model."""
        frame = curve.frame
        alpha = 1.0 - frame.level
        # Nodes need not be at these quantiles exactly.
        nodes = np.stack(
            [frame.law.quantile(1.0 - f * alpha, float(-ndtri(f * alpha)), 0.05) for f in FRACTIONS]
        )
        nodes = frame.u * nodes.reshape(len(FRACTIONS), *frame.u.shape)
        left, right = frame.origin + shift - nodes, frame.origin + shift + nodes[::-1]
        middle = FRACTIONS.index(0.5)
        low, high = curve.smoothing.at(left[middle]), curve.smoothing.at(right[middle])
        return cls(curve=curve, left=left, right=right, low=low, high=high)

    def outlook(self) -> tuple[Array, Array, Array]:
        """Numerical standard deviations of low and high before either is found, and their doubt (Pb, m)."""
        sds, doubts = [], []
        middle = FRACTIONS.index(0.5)
        for t, (d, e) in ((self.left[middle], self.low), (self.right[middle], self.high)):
            sd, doubt = self.curve.over.spread(d)
            density = self.curve.frame.linear(t)[1] + self.curve.over.mean(e)
            floor = 1e-3 * self.curve.frame.level * (1.0 - self.curve.frame.level) / self.curve.frame.u
            sds.append(sd / np.maximum(density, floor))
            doubts.append(doubt)
        return sds[0], sds[1], np.maximum(*doubts)


def solve(start: Start) -> Ends:
    """All ends."""
    curve, alpha = start.curve, 1.0 - start.curve.frame.level
    left = Side.sampled(curve, start.left, start.low)
    right = Side.sampled(curve, start.right, start.high)
    low = _end(curve, left, 0.5 * alpha)
    high = _end(curve, right, 1.0 - 0.5 * alpha)
    left, right = _followed(curve, left, right, low.t, high.t)
    short_low, short_high, short_low_sd, short_high_sd = _shortest(curve, left, right)
    return Ends(
        low=low.t,
        high=high.t,
        short_low=short_low,
        short_high=short_high,
        low_sd=low.sd,
        high_sd=high.sd,
        short_low_sd=short_low_sd,
        short_high_sd=short_high_sd,
        doubt=np.maximum(low.doubt, high.doubt),
        settled=low.settled & high.settled,
    )


def _followed(curve: Curve, left: Side, right: Side, low: Array, high: Array) -> tuple[Side, Side]:
    """The sides with nodes about the ends found, in rows where the linear model had placed them elsewhere."""
    middle = FRACTIONS.index(0.5)
    centre = left.t[middle], right.t[middle]
    off = np.maximum(np.abs(low - centre[0]), np.abs(high - centre[1])) > 0.25 * curve.frame.u
    if not off.any():
        return left, right
    wider = np.where(off, (high - low) / (centre[1] - centre[0]), 1.0)
    moved = [
        np.where(off, end + wider * (side.t - at), side.t)
        for side, end, at in ((left, low, centre[0]), (right, high, centre[1]))
    ]
    return Side.sampled(curve, moved[0]), Side.sampled(curve, moved[1])


@dataclass(frozen=True, slots=True, kw_only=True)
class _End:
    """One end (Pb, m) of the symmetric interval."""

    t: Array
    sd: Array
    doubt: Array
    settled: NDArray[np.bool_]


def _end(curve: Curve, side: Side, p: float) -> _End:
    """Newton on F̂ itself from the interpolated start; a row stops by itself."""
    u = curve.frame.u
    t = side.inverse(np.full((1, *u.shape), p))[0][0]
    floor = 1e-3 * p * (1.0 - p) / u
    moving = np.ones(t.shape, dtype=np.bool_)
    seen = curve.at(t)
    for _ in range(_STEPS):
        move = np.clip((p - seen.cdf) / np.maximum(seen.pdf, floor), -u, u)
        # Newton squares its error: after a step of 3e-4 u no more than 1e-7 u is left.
        t, moving = np.where(moving, t + move, t), moving & (np.abs(move) > 3e-4 * u)
        if not moving.any():
            break
        seen = seen.renewed(curve.at(t), moving)
    sd, doubt = curve.over.spread(seen.d)
    steep = np.maximum(seen.pdf, floor)
    return _End(t=t, sd=sd / steep, doubt=doubt, settled=~moving & (seen.pdf > floor))


def _shortest(curve: Curve, left: Side, right: Side) -> tuple[Array, Array, Array, Array]:
    """Shortest interval (JCGM 101:2008, 5.3.4): its ends, then their numerical standard deviations.

    It holds the level and has equal densities at both ends. A search over the interpolated curve is followed by
    Newton steps on these two equations with F̂ itself, where they settle; errors of F̂ and of its density move the
    ends by the same linear equations.
    """
    level, u = curve.frame.level, curve.frame.u
    start = _search(left, right, level)
    low, high, rise, fall = start
    moving = np.ones(u.shape, dtype=np.bool_)
    below, above = curve.at(low), curve.at(high)
    sds = _Pair(f_low=below.pdf, f_high=above.pdf, rise=rise, fall=fall).spreads(curve, below, above)
    for _ in range(_SHORT_STEPS):
        system = _Pair(f_low=below.pdf, f_high=above.pdf, rise=rise, fall=fall)
        steps = system.moved(above.cdf - below.cdf - level, above.pdf - below.pdf)
        left_by, right_by = (np.where(moving, np.clip(step, -0.3 * u, 0.3 * u), 0.0) for step in steps)
        low, high = low + left_by, high + right_by
        moving = moving & (np.maximum(np.abs(left_by), np.abs(right_by)) > 2e-3 * u)
        if not moving.any():
            break
        was_low, was_high = below.pdf, above.pdf
        below, above = below.renewed(curve.at(low), moving), above.renewed(curve.at(high), moving)
        rise = _secant(rise, left_by, below.pdf - was_low, moving)
        fall = _secant(fall, right_by, above.pdf - was_high, moving)
    return np.where(moving, start[0], low), np.where(moving, start[1], high), *sds


def _search(left: Side, right: Side, level: float) -> tuple[Array, Array, Array, Array]:
    """Shortest interval of the interpolated curve, and the slopes of the density at its ends."""
    shape = left.t.shape[1:]
    p = (1.0 - level) * np.linspace(FRACTIONS[0], FRACTIONS[-1], _SHORTEST + 1)[:, None, None]
    p = np.broadcast_to(p, (_SHORTEST + 1, *shape))
    length = right.inverse(p + level)[0] - left.inverse(p)[0]
    inner = np.clip(np.argmin(length, axis=0)[None], 1, _SHORTEST - 1)
    before, at, after = (np.take_along_axis(length, inner + i, axis=0) for i in (-1, 0, 1))
    bend = before - 2.0 * at + after
    offset = np.clip(0.5 * (before - after) / np.where(bend > 0.0, bend, 1.0), -1.0, 1.0)
    chosen = np.take_along_axis(p, inner, axis=0) + offset * (p[1] - p[0])
    (low,), (rise,) = left.inverse(chosen)
    (high,), (fall,) = right.inverse(chosen + level)
    return low, high, rise, fall


def _secant(slope: Array, step: Array, change: Array, moving: NDArray[np.bool_]) -> Array:
    """The slope of the density as the last step saw it, where it was a step at all."""
    seen = change / np.where(step == 0.0, np.inf, step)
    return np.where(moving & (step != 0.0), seen, slope)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Pair:
    """F(h) − F(l) = level and f(h) = f(l), linear about (l, h): densities and their slopes (Pb, m)."""

    f_low: Array
    f_high: Array
    rise: Array
    fall: Array

    def moved(self, held: Array, tilt: Array) -> tuple[Array, Array]:
        """Steps of l and h that undo an excess of what is held and of the upper density over the lower.

        None where the density does not clearly fall away from the interval on both sides.
        """
        determinant = self.f_high * self.rise - self.f_low * self.fall
        safe = np.where(determinant > 0.0, determinant, np.inf)
        extra = (..., *(None,) * (held.ndim - safe.ndim))
        f_low, f_high, rise, fall = (
            v[extra] / safe[extra] for v in (self.f_low, self.f_high, self.rise, self.fall)
        )
        return tilt * f_high - held * fall, tilt * f_low - held * rise

    def spreads(self, curve: Curve, below: Seen, above: Seen) -> tuple[Array, Array]:
        """Numerical standard deviations of l and h; NaN where the density is flat."""
        determinant = self.f_high * self.rise - self.f_low * self.fall
        clear = determinant > 0.02 * (self.f_low + self.f_high) ** 2 / curve.frame.u
        parts = self.moved(above.d - below.d, above.e - below.e)
        low, high = (np.where(clear, curve.over.spread(part)[0], np.nan) for part in parts)
        return low, high
