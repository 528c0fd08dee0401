"""F̂(t) = F_L(t) + mean of d_i(t): at a point, and interpolated over one tail of the distribution.

Rows are outputs at points, (Pb, m); every row goes its own way, so that none depends on those beside it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.probability.controls import Regression
from tapband.probability.linear_law import LinearLaw
from tapband.probability.smoothing import Smoothing

Array = NDArray[np.float64]

FRACTIONS = (0.03, 0.15, 0.5, 0.8, 0.97)
"""Tail probabilities, as fractions of 1 − p, at which F̂ is known on either side."""
_SAMPLED = (0, 2, 4)
"""Those at which the difference is averaged; it is small and smooth, so a cubic carries it to the others."""


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


@dataclass(frozen=True, slots=True, kw_only=True)
class Curve:
    """F̂, by an exact law and what trials add to it."""

    frame: Frame
    smoothing: Smoothing
    over: Regression

    def at(self, t: Array) -> Seen:
        """F̂ and its density at t (Pb, m)."""
        d, e = self.smoothing.at(t)
        linear, density = self.frame.linear(t)
        return Seen(cdf=linear + self.over.mean(d), pdf=density + self.over.mean(e), d=d, e=e)


@dataclass(frozen=True, slots=True, kw_only=True)
class Seen:
    """F̂ and its density (Pb, m), with what each trial (Pb, m, N) had to say about either."""

    cdf: Array
    pdf: Array
    d: Array
    e: Array

    def renewed(self, new: Seen, rows: NDArray[np.bool_]) -> Seen:
        """The new values in some rows: one that has stopped must not move with those beside it."""
        wide = rows[..., None]
        return Seen(
            cdf=np.where(rows, new.cdf, self.cdf),
            pdf=np.where(rows, new.pdf, self.pdf),
            d=np.where(wide, new.d, self.d),
            e=np.where(wide, new.e, self.e),
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Side:
    """F̂ and its density at nodes t (k, Pb, m), ascending: a cubic between each two."""

    t: Array
    cdf: Array
    pdf: Array

    @classmethod
    def sampled(cls, curve: Curve, t: Array, middle: tuple[Array, Array] | None = None) -> Side:
        """Averaged at nodes t (5, Pb, m); ``middle``: what the smoothing says at t[2], where that is known."""
        cdf, pdf = np.empty_like(t), np.empty_like(t)
        for k in _SAMPLED:
            d, e = curve.smoothing.at(t[k]) if middle is None or k != 2 else middle
            cdf[k], pdf[k] = curve.over.mean(d), curve.over.mean(e)
        for k in range(1, len(t), 2):
            cdf[k], pdf[k] = _between(t[k - 1 : k + 2], cdf[k - 1 : k + 2 : 2], pdf[k - 1 : k + 2 : 2])
        for k, node in enumerate(t):
            linear, density = curve.frame.linear(node)
            cdf[k] += linear
            pdf[k] += density
        return cls(t=t, cdf=cdf, pdf=np.maximum(pdf, 0.0))

    def inverse(self, p: Array) -> tuple[Array, Array]:
        """t and the slope of the density there (q, Pb, m), at probabilities p (q, Pb, m).

        The outer cubics are continued a little.
        """
        k = len(self.t)
        cell = np.clip((p[:, None] > self.cdf[None, 1 : k - 1]).sum(axis=1), 0, k - 2)
        t0, t1 = (np.take_along_axis(self.t, cell + i, axis=0) for i in (0, 1))
        f0, f1 = (np.take_along_axis(self.cdf, cell + i, axis=0) for i in (0, 1))
        width = t1 - t0
        g0, g1 = (np.take_along_axis(self.pdf, cell + i, axis=0) * width for i in (0, 1))
        rise = f1 - f0
        quad, cube = 3.0 * rise - 2.0 * g0 - g1, g0 + g1 - 2.0 * rise
        v = np.clip((p - f0) / np.where(rise > 0, rise, 1.0), -0.25, 1.25)
        for _ in range(4):
            value = f0 + v * (g0 + v * (quad + v * cube)) - p
            slope = g0 + v * (2.0 * quad + v * (3.0 * cube))
            v = np.clip(v - value / np.maximum(slope, 1e-12), -0.25, 1.25)
        return t0 + v * width, (2.0 * quad + 6.0 * v * cube) / (width * width)


def _between(t: Array, value: Array, slope: Array) -> tuple[Array, Array]:
    """Value and slope at t[1] of the cubic with given values and slopes (2, ...) at t[0] and t[2]."""
    width = t[2] - t[0]
    v = (t[1] - t[0]) / width
    rise, g0, g1 = value[1] - value[0], slope[0] * width, slope[1] * width
    quad, cube = 3.0 * rise - 2.0 * g0 - g1, g0 + g1 - 2.0 * rise
    return value[0] + v * (g0 + v * (quad + v * cube)), (g0 + v * (2.0 * quad + v * (3.0 * cube))) / width
