"""Ends of coverage intervals from an exactly known distribution and an averaged difference to it.

F̂(t) = F_L(t) + mean_i d_i(t). Rows are outputs at points, (Pb, m); every row goes its own way, so that none
depends on those beside it. Numerical standard deviations are those of the averages, carried through.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from tapband.probability.controls import Regression
from tapband.probability.linear_law import LinearLaw
from tapband.probability.smoothing import Smoothing

Array = NDArray[np.float64]

FRACTIONS = (0.03, 0.15, 0.5, 0.8, 0.97)
"""Tail probabilities, as fractions of 1 − p, at which F̂ is known on either side."""
_SAMPLED = (0, 2, 4)
"""Those at which the difference is averaged; it is small and smooth, so a cubic carries it to the others."""
_SHORTEST = 48
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
    short_high_sd: Array
    doubt: Array
    """Relative standard deviation (Pb, m) of the claimed standard deviations of low and high."""
    settled: NDArray[np.bool_]
    """False where the search failed: the output is too unlike its linear model."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Frame:
    """Where rows stand: y = origin + u·x, and the exact law of x."""

    law: LinearLaw
    origin: Array
    u: Array
    level: float

    def linear(self, t: Array) -> tuple[Array, Array]:
        """F_L and its density (Pb, m) at t."""
        cdf, pdf = self.law.at(((t - self.origin) / self.u).ravel())
        return cdf.reshape(t.shape), pdf.reshape(t.shape) / self.u


def solve(frame: Frame, smoothing: Smoothing, over: Regression, shift: Array) -> Ends:
    """All ends, averaged ``over`` the trials; the search starts ``shift`` (Pb, m) from the linear model."""
    alpha = 1.0 - frame.level
    sides: list[_Side] = []
    # Nodes need not be at these quantiles exactly.
    nodes = np.stack([frame.law.quantile(1.0 - f * alpha, float(-ndtri(f * alpha)), 0.05) for f in FRACTIONS])
    nodes = nodes.reshape(len(FRACTIONS), *frame.u.shape)
    for sign in (-1.0, 1.0):
        ordered = sign * nodes if sign < 0 else nodes[::-1]
        t = frame.origin + shift + frame.u * ordered
        sides.append(_Side.sampled(frame, smoothing, over, t))
    low = _end(frame, smoothing, over, sides[0], 0.5 * alpha)
    high = _end(frame, smoothing, over, sides[1], 1.0 - 0.5 * alpha)
    short = _shortest(sides, over, frame.level, low, high)
    return Ends(
        low=low.t, high=high.t, low_sd=low.sd, high_sd=high.sd, doubt=np.maximum(low.doubt, high.doubt),
        short_low=short[0], short_high=short[1], short_low_sd=short[2], short_high_sd=short[3],
        settled=low.settled & high.settled,
    )  # fmt: skip


@dataclass(frozen=True, slots=True, kw_only=True)
class _Side:
    """F̂ and its density at nodes t (k, Pb, m), ascending: a cubic between each two."""

    t: Array
    cdf: Array
    pdf: Array

    @classmethod
    def sampled(cls, frame: Frame, smoothing: Smoothing, over: Regression, t: Array) -> _Side:
        cdf, pdf = np.empty_like(t), np.empty_like(t)
        for k in _SAMPLED:
            d, e = smoothing.at(t[k])
            cdf[k], pdf[k] = over.mean(d), over.mean(e)
        for k in range(1, len(t), 2):
            cdf[k], pdf[k] = _between(t[k - 1 : k + 2], cdf[k - 1 : k + 2 : 2], pdf[k - 1 : k + 2 : 2])
        for k, node in enumerate(t):
            linear, density = frame.linear(node)
            cdf[k] += linear
            pdf[k] += density
        return cls(t=t, cdf=cdf, pdf=np.maximum(pdf, 0.0))

    @property
    def bend(self) -> Array:
        """Slope of the density (Pb, m) about the middle node."""
        middle = len(self.t) // 2
        return (self.pdf[middle + 1] - self.pdf[middle - 1]) / (self.t[middle + 1] - self.t[middle - 1])

    def inverse(self, p: Array) -> tuple[Array, Array]:
        """t and density (q, Pb, m) at probabilities p (q, Pb, m); the outer cubics are continued a little."""
        k = len(self.t)
        cell = np.clip((p[:, None] > self.cdf[None, 1 : k - 1]).sum(axis=1), 0, k - 2)
        t0, t1 = (np.take_along_axis(self.t, cell + i, axis=0) for i in (0, 1))
        f0, f1 = (np.take_along_axis(self.cdf, cell + i, axis=0) for i in (0, 1))
        width = t1 - t0
        g0, g1 = (np.take_along_axis(self.pdf, cell + i, axis=0) * width for i in (0, 1))
        rise = f1 - f0
        quad, cube = 3.0 * rise - 2.0 * g0 - g1, g0 + g1 - 2.0 * rise
        v = np.clip((p - f0) / np.where(rise > 0, rise, 1.0), -0.25, 1.25)
        for _ in range(5):
            value = f0 + v * (g0 + v * (quad + v * cube)) - p
            slope = g0 + v * (2.0 * quad + v * (3.0 * cube))
            v = np.clip(v - value / np.maximum(slope, 1e-12), -0.25, 1.25)
        slope = g0 + v * (2.0 * quad + v * (3.0 * cube))
        return t0 + v * width, np.maximum(slope, 1e-12) / width


def _between(t: Array, value: Array, slope: Array) -> tuple[Array, Array]:
    """Value and slope at t[1] of the cubic with given values and slopes (2, ...) at t[0] and t[2]."""
    width = t[2] - t[0]
    v = (t[1] - t[0]) / width
    rise, g0, g1 = value[1] - value[0], slope[0] * width, slope[1] * width
    quad, cube = 3.0 * rise - 2.0 * g0 - g1, g0 + g1 - 2.0 * rise
    return value[0] + v * (g0 + v * (quad + v * cube)), (g0 + v * (2.0 * quad + v * (3.0 * cube))) / width


@dataclass(frozen=True, slots=True, kw_only=True)
class _End:
    """One end (Pb, m) of the symmetric interval, with what each trial (Pb, m, N) had to say there."""

    t: Array
    density: Array
    sd: Array
    doubt: Array
    settled: NDArray[np.bool_]
    cdf_influence: Array
    pdf_influence: Array


def _end(frame: Frame, smoothing: Smoothing, over: Regression, side: _Side, p: float) -> _End:
    """Newton on F̂ itself from the interpolated start; a row stops by itself."""
    t = side.inverse(np.full((1, *frame.u.shape), p))[0][0]
    moving = np.ones(t.shape, dtype=np.bool_)
    for _ in range(_STEPS):
        d, e = smoothing.at(t)
        linear, density = frame.linear(t)
        pdf = density + over.mean(e)
        miss = linear + over.mean(d) - p
        floor = 1e-3 * p * (1.0 - p) / frame.u
        move = np.clip(-miss / np.maximum(pdf, floor), -frame.u, frame.u)
        # Newton squares its error: after a step of 3e-4 u no more than 1e-7 u is left.
        t, moving = np.where(moving, t + move, t), moving & (np.abs(move) > 3e-4 * frame.u)
        if not moving.any():
            break
    settled = ~moving & (pdf > floor)
    sd, doubt = over.spread(d)
    pdf = np.maximum(pdf, floor)
    return _End(t=t, density=pdf, sd=sd / pdf, doubt=doubt, settled=settled, cdf_influence=d, pdf_influence=e)


def _shortest(sides: list[_Side], over: Regression, level: float, low: _End, high: _End) -> tuple[Array, Array, Array, Array]:
    """Shortest interval and the numerical standard deviations of its ends.

    Length(p) = Q(p + level) − Q(p) is least where the densities at both ends are equal. Its ends err with F̂
    at either end and with p, which errs as far as the difference of the densities does, over the curvature.
    """
    alpha = 1.0 - level
    fractions = np.linspace(FRACTIONS[0], FRACTIONS[-1], _SHORTEST + 1)
    p = np.broadcast_to((alpha * fractions)[:, None, None], (fractions.size, *low.t.shape))
    left, right = sides[0].inverse(p)[0], sides[1].inverse(p + level)[0]
    best = np.clip(np.argmin(right - left, axis=0), 1, _SHORTEST - 1)[None]
    before, at, after = (np.take_along_axis(right - left, best + i, axis=0)[0] for i in (-1, 0, 1))
    step = alpha * (fractions[1] - fractions[0])
    bend = before - 2.0 * at + after
    offset = np.clip(0.5 * (before - after) / np.where(bend > 0, bend, 1.0), -1.0, 1.0)
    chosen = (np.take_along_axis(p, best, axis=0)[0] + step * offset)[None]
    (short_low,), (low_density,) = sides[0].inverse(chosen)
    (short_high,), (high_density,) = sides[1].inverse(chosen + level)
    ends = ((sides[0], low, low_density), (sides[1], high, high_density))
    moved, tilt = [], []
    for side, end, density in ends:
        drift = -end.cdf_influence / density[..., None]
        change = end.pdf_influence + side.bend[..., None] * drift
        moved.append(drift)
        tilt.append(-change / (density * density)[..., None])
    curvature = np.where(bend > 0, bend, np.nan) / step**2
    place = -(tilt[1] - tilt[0]) / curvature[..., None]
    sds = [over.spread(m + place / d[..., None])[0] for m, (*_, d) in zip(moved, ends, strict=True)]
    return short_low, short_high, sds[0], sds[1]
