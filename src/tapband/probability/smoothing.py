"""What trials say once one direction, or all that enters linearly, is integrated out instead of drawn.

Each smoothing knows, for every trial i, the distribution of the output given what was drawn, and that of the
linear model given the same draws. Only their difference is averaged: the linear model's own distribution is
known exactly (:mod:`tapband.probability.linear_law`). Arrays are (Pb, m, N), trials last.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import pi, sqrt
from typing import Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from tapband.nouns.source import Shape
from tapband.probability.distributions import half_width
from tapband.probability.linear_law import LinearLaw

Array = NDArray[np.float64]


_ROOT = sqrt(2.0 * pi)


class Smoothing(Protocol):
    """Difference of the conditional distributions of output and linear model."""

    def at(self, t: Array) -> tuple[Array, Array]:
        """Differences of distribution function and of density (Pb, m, N) at t (Pb, m)."""
        ...


class Base(Protocol):
    """A standardised law that is integrated out."""

    def at(self, x: Array) -> tuple[Array, Array]:
        """Distribution function and density, in the shape of x."""
        ...


class NormalBase:
    """The standard normal law."""

    def at(self, x: Array) -> tuple[Array, Array]:
        """Φ and its density."""
        density = np.exp(-0.5 * (x * x))
        density *= 1.0 / sqrt(2.0 * pi)
        return ndtr(x), density


@dataclass(frozen=True, slots=True)
class ShapeBase:
    """One bounded standardised latent."""

    shape: Shape
    top: float

    def at(self, x: Array) -> tuple[Array, Array]:
        """Closed forms; *Source* JCGM 101:2008, 6.4.2-6.4.6."""
        half = half_width(self.shape, self.top)
        inside = np.abs(x) < half
        if self.shape is Shape.RECTANGULAR:
            return np.clip(0.5 + x * (0.5 / half), 0.0, 1.0), np.where(inside, 0.5 / half, 0.0)
        z = np.clip(x / half, -1.0, 1.0)
        if self.shape is Shape.ARCSINE:
            density = 1.0 / (pi * half * np.sqrt(np.maximum(1.0 - z * z, 1e-12)))
            return 0.5 + np.arcsin(z) / pi, np.where(inside, density, 0.0)
        beta = self.top if self.shape is Shape.TRAPEZOIDAL else 0.0
        away = np.abs(z)
        flat = 2.0 * away / (1.0 + beta)
        slope = max(1.0 - beta, 1e-300)
        tail = (1.0 - away) ** 2 / (slope * (1.0 + beta))
        within = np.where(away <= beta, flat, 1.0 - tail)
        density = np.where(away <= beta, 1.0, (1.0 - away) / slope) / (half * (1.0 + beta))
        return 0.5 + 0.5 * np.copysign(within, z), np.where(inside, density, 0.0)


class TableBase:
    """Laws of rows (Pb, m) tabulated once: cubic Hermite interpolation between steps of 1/32."""

    _STEPS = 32
    _REACH = 8

    def __init__(self, law: LinearLaw, shape: tuple[int, int]) -> None:
        half = np.arange(self._REACH * self._STEPS + 1) / self._STEPS
        cdf, pdf = law.table(half)
        cdf = np.concatenate([1.0 - cdf[:, :0:-1], cdf], axis=1)
        pdf = np.concatenate([pdf[:, :0:-1], pdf], axis=1) / self._STEPS
        rise = np.diff(cdf, axis=1)
        left, right = pdf[:, :-1], pdf[:, 1:]
        cubic = np.stack(
            [cdf[:, :-1], left, 3.0 * rise - 2.0 * left - right, left + right - 2.0 * rise], axis=-1
        )
        self._cells = cubic.shape[1]
        self._cubic = np.ascontiguousarray(cubic.reshape(-1, 4))
        self._row = (np.arange(len(cdf)) * self._cells).reshape(*shape, 1)

    def at(self, x: Array) -> tuple[Array, Array]:
        """Interpolated distribution function and density."""
        place = (x + self._REACH) * self._STEPS
        place = np.clip(np.where(np.isnan(place), 0.0, place), 0.0, self._cells * (1.0 - 1e-15))
        cell = place.astype(np.intp)
        v = place - cell
        c = self._cubic[cell + self._row]
        cdf = c[..., 0] + v * (c[..., 1] + v * (c[..., 2] + v * c[..., 3]))
        pdf = (c[..., 1] + v * (2.0 * c[..., 2] + v * (3.0 * c[..., 3]))) * self._STEPS
        return cdf, np.where(np.abs(x) < self._REACH, pdf, 0.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class Normal:
    """Given the draws, the output is y + s·z exactly, z standard normal, and the linear model linear + s0·z."""

    y: Array
    s: Array
    linear: Array
    s0: Array

    def at(self, t: Array) -> tuple[Array, Array]:
        """See :class:`Smoothing`.

        Φ(x + h) − Φ(x − h) = 2hφ(x)[1 + h²(x² − 1)/6 + h⁴(x⁴ − 6x² + 3)/120 + …], six times quicker than
        two Φ and right to 1e-8 while 2h is below 0.4.
        """
        upper, lower = (t[..., None] - self.y) / self.s, (t[..., None] - self.linear) / self.s0
        upper_density, lower_density = np.exp(-0.5 * upper * upper), np.exp(-0.5 * lower * lower)
        middle, half = 0.5 * (upper + lower), 0.5 * (upper - lower)
        x2, h2 = middle * middle, half * half
        series = 1.0 + h2 * ((x2 - 1.0) / 6.0 + h2 * ((x2 * (x2 - 6.0) + 3.0) / 120.0))
        difference = (2.0 / _ROOT) * half * np.exp(-0.5 * x2) * series
        wide = h2 > 0.04
        if wide.any():
            difference[wide] = ndtr(upper[wide]) - ndtr(lower[wide])
        return difference, (upper_density / self.s - lower_density / self.s0) * (1.0 / _ROOT)


@dataclass(frozen=True, slots=True, kw_only=True)
class Integrated:
    """Given the draws, the output is y + s·base exactly, and the linear model linear + s0·base."""

    base: Base
    y: Array
    s: Array
    linear: Array
    s0: Array

    def at(self, t: Array) -> tuple[Array, Array]:
        """See :class:`Smoothing`."""
        upper, upper_density = self.base.at((t[..., None] - self.y) / self.s)
        lower, lower_density = self.base.at((t[..., None] - self.linear) / self.s0)
        return upper - lower, upper_density / self.s - lower_density / self.s0


@dataclass(frozen=True, slots=True, kw_only=True)
class Line:
    """Along one line of latents, coordinate η of law ``base``, the output is nearly a polynomial of η.

    P(y ≤ t) on the line is taken as that of the set between two roots: one refined, one of the parabola. What
    that leaves is repaired without bias by the trial itself, which stands somewhere on the line: as the
    difference of two indicators, almost never other than 0.
    """

    base: Base
    powers: Array
    """(5, Pb, m, N): coefficients of 1, η, …, η⁴ through the five nodes."""
    parabola: Array
    """(3, Pb, m, N): those of the parabola nearest to it."""
    inside: float
    """|η| up to which the quartic is trusted."""
    eta: Array
    """η of the trial (Pb, 1, N)."""
    y: Array
    """The output at the trial."""
    linear: Array
    """The linear model on the line at η = 0."""
    slope: Array
    """|∂l/∂η|"""

    def at(self, t: Array) -> tuple[Array, Array]:
        """See :class:`Smoothing`."""
        level = t[..., None]
        near, far, opens_up, root = self._roots(level)
        near_cdf, near_density = self.base.at(near)
        far_cdf, far_density = self.base.at(far)
        between = (self.eta > np.minimum(near, far)) & (self.eta <= np.maximum(near, far))
        mass = np.abs(near_cdf - far_cdf)
        real = root > 0.0
        upper = np.where(real, np.where(opens_up, mass, 1.0 - mass), ~opens_up)
        inside = np.where(real, between == opens_up, ~opens_up)
        repair = (self.y <= level).astype(np.float64) - inside
        density = np.where(real, (near_density + far_density) / np.where(real, root, 1.0), 0.0)
        lower, lower_density = self.base.at((level - self.linear) / self.slope)
        return upper - lower + repair, density - lower_density / self.slope

    def _roots(self, level: Array) -> tuple[Array, Array, NDArray[np.bool_], Array]:
        """Roots of the parabola, the near one refined; whether y is below t between them; the slope at either.

        Where there are none the slope is 0.
        """
        a, b, c = self.parabola
        rise = level - a
        root = np.sqrt(np.maximum(b * b + 4.0 * c * rise, 0.0))
        sum_ = b + np.copysign(np.where(root > 0.0, root, 1.0), b)
        near = 2.0 * rise / sum_
        flat = np.abs(c) < 1e-14 * np.abs(b)
        far = np.where(flat, -np.copysign(np.inf, c * sum_), -sum_ / np.where(flat, 1.0, 2.0 * c))
        p, fine = self.powers, near
        for _ in range(2):
            value = p[0] + fine * (p[1] + fine * (p[2] + fine * (p[3] + fine * p[4])))
            slope = p[1] + fine * (2.0 * p[2] + fine * (3.0 * p[3] + fine * (4.0 * p[4])))
            fine = fine - (value - level) / np.where(slope == 0.0, np.inf, slope)
        close = (np.abs(fine) < self.inside) & (np.abs(fine - near) < 0.5) & (np.abs(near) < self.inside)
        return np.where(close, fine, near), far, c >= 0.0, root
