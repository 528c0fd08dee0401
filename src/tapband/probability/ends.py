"""Ends of coverage intervals from F̂, with the numerical standard deviations of its averages carried through."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from tapband.probability.curve import FRACTIONS, Curve, Side

Array = NDArray[np.float64]

_SHORTEST = 32
"""Probabilities tried for the shortest interval."""
_STEPS = 8


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


def solve(curve: Curve, shift: Array) -> Ends:
    """All ends; the search starts ``shift`` (Pb, m) from those of the linear model."""
    frame = curve.frame
    alpha = 1.0 - frame.level
    # Nodes need not be at these quantiles exactly.
    nodes = np.stack([frame.law.quantile(1.0 - f * alpha, float(-ndtri(f * alpha)), 0.05) for f in FRACTIONS])
    nodes = frame.u * nodes.reshape(len(FRACTIONS), *frame.u.shape)
    left = Side.sampled(curve, frame.origin + shift - nodes)
    right = Side.sampled(curve, frame.origin + shift + nodes[::-1])
    low = _end(curve, left, 0.5 * alpha)
    high = _end(curve, right, 1.0 - 0.5 * alpha)
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
    for _ in range(_STEPS):
        seen = curve.at(t)
        move = np.clip((p - seen.cdf) / np.maximum(seen.pdf, floor), -u, u)
        # Newton squares its error: after a step of 3e-4 u no more than 1e-7 u is left.
        t, moving = np.where(moving, t + move, t), moving & (np.abs(move) > 3e-4 * u)
        if not moving.any():
            break
    sd, doubt = curve.over.spread(seen.d)
    steep = np.maximum(seen.pdf, floor)
    return _End(t=t, sd=sd / steep, doubt=doubt, settled=~moving & (seen.pdf > floor))


def _shortest(curve: Curve, left: Side, right: Side) -> tuple[Array, Array, Array, Array]:
    """Shortest interval (JCGM 101:2008, 5.3.4): its ends, then their numerical standard deviations.

    It holds the level and has equal densities at both ends. A search over the interpolated curve is followed by
    one Newton step on these two equations with F̂ itself; errors of F̂ and of its density move the ends by the
    same linear equations.
    """
    level, u = curve.frame.level, curve.frame.u
    p = (1.0 - level) * np.linspace(FRACTIONS[0], FRACTIONS[-1], _SHORTEST + 1)[:, None, None]
    p = np.broadcast_to(p, (_SHORTEST + 1, *u.shape))
    length = right.inverse(p + level)[0] - left.inverse(p)[0]
    best = np.argmin(length, axis=0)[None]
    inner = np.clip(best, 1, _SHORTEST - 1)
    before, at, after = (np.take_along_axis(length, inner + i, axis=0) for i in (-1, 0, 1))
    bend = before - 2.0 * at + after
    offset = np.clip(0.5 * (before - after) / np.where(bend > 0.0, bend, 1.0), -1.0, 1.0)
    chosen = np.take_along_axis(p, inner, axis=0) + offset * (p[1] - p[0])
    (low,), (rise,) = left.inverse(chosen)
    (high,), (fall,) = right.inverse(chosen + level)
    below, above = curve.at(low), curve.at(high)
    system = _Pair(f_low=below.pdf, f_high=above.pdf, rise=rise, fall=fall)
    step_low, step_high = system.moved(above.cdf - below.cdf - level, above.pdf - below.pdf)
    clear = system.determinant > 0.02 * (below.pdf + above.pdf) ** 2 / u
    step_low, step_high = (np.where(clear, np.clip(s, -0.3 * u, 0.3 * u), 0.0) for s in (step_low, step_high))
    sds = [curve.over.spread(part)[0] for part in system.moved(above.d - below.d, above.e - below.e)]
    return low + step_low, high + step_high, *(np.where(clear, sd, np.nan) for sd in sds)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Pair:
    """F(h) − F(l) = level and f(h) = f(l), linear about (l, h): densities and their slopes (Pb, m)."""

    f_low: Array
    f_high: Array
    rise: Array
    fall: Array

    @property
    def determinant(self) -> Array:
        """Positive where the density falls away from the interval on both sides."""
        return self.f_high * self.rise - self.f_low * self.fall

    def moved(self, held: Array, tilt: Array) -> tuple[Array, Array]:
        """Steps of l and h that undo an excess of what is held and of the upper density over the lower."""
        extra = (None,) * (held.ndim - self.f_low.ndim)
        f_low, f_high, rise, fall, determinant = (
            value[(..., *extra)]
            for value in (self.f_low, self.f_high, self.rise, self.fall, self.determinant)
        )
        safe = np.where(determinant > 0.0, determinant, np.inf)
        return (held * fall - tilt * f_high) / safe, (held * rise - tilt * f_low) / safe
