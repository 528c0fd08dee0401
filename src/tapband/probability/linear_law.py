"""The exact distribution of linear combinations of latents, many at once, by characteristic functions.

A row is one output at one point: L = Σ_f Σ_k S_fk ξ_fk, in units of its standard uncertainty (t families
counted at unit variance). All shapes are symmetric, so the characteristic function φ is real and

    F(x) = ½ + (1/π) ∫₀^∞ φ(ω) sin(ωx)/ω dω

up to where φ has died: by the midpoint rule, whose only error is the tail beyond its period less |x|, or, for
heavy tails, by Gauss-Legendre panels. Rows whose φ dies slowly (one or two rectangles, little else) are damped
by a kernel of higher order, which moves a smooth F by less than 1e-6.

*Source* J. Gil-Pelaez, Biometrika 38 (1951) 481; R. B. Davies, Biometrika 60 (1973) 415.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from math import ceil, pi, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri, stdtrit

from tapband.nouns.problem import Family
from tapband.nouns.source import Shape
from tapband.probability.distributions import (
    DOUBT_NODES,
    DOUBT_WEIGHTS,
    characteristic,
    half_width,
    log_coefficients,
    student,
)

Array = NDArray[np.float64]
Rows = NDArray[np.intp]

_LAST = (6.5, 9.0, 13.0, 20.0, 32.0, 64.0, 128.0, 256.0, 600.0, 2400.0)
"""Highest frequencies; a row takes the first at which its φ is below _DEAD."""
_DEAD = 1e-8
_REACH = (8.0, 12.0, 18.0, 27.0, 64.0, 256.0, 1024.0)
"""Largest |x| resolved; beyond it F stands still."""
_PERIODS = (16.0, 20.0, 28.0, 40.0, 64.0, 100.0)
"""Periods of the midpoint rule; rows that need a longer one take panels (period inf)."""
_BEYOND = 1e-9
"""Probability that may lie beyond the period."""
_DAMPING = 7.5 / _LAST[-1]
_SMALL = 1.5
"""Half-width times frequency up to which four terms of log φ do (the next is below 1e-4 of a dead φ)."""
_NODES, _WEIGHTS = (np.asarray(v, dtype=np.float64) for v in np.polynomial.legendre.leggauss(16))


@dataclass(frozen=True, slots=True, kw_only=True)
class Term:
    """One family in all rows: sensitivities (R, G) in units of the rows' u, ν (R,) and doubt r (R,)."""

    family: Family
    size: Array
    dof: Array
    doubt: Array


@dataclass(frozen=True, slots=True, kw_only=True)
class _Part:
    """Rows that share a grid of frequencies ω (K,), with φ·weight/π (Rc, K)."""

    rows: Rows
    omega: Array
    reach: float
    density: Array
    share: Array
    """density / ω"""


@dataclass(frozen=True, slots=True, kw_only=True)
class LinearLaw:
    """Distribution functions of R standardised rows."""

    count: int
    parts: tuple[_Part, ...]

    def at(self, x: Array) -> tuple[Array, Array]:
        """F and density (R,) at x (R,); NaN in rows that have no law."""
        cdf, pdf = np.full(self.count, np.nan), np.full(self.count, np.nan)
        for part in self.parts:
            angle = np.clip(x[part.rows], -part.reach, part.reach)[:, None] * part.omega
            cdf[part.rows] = 0.5 + (part.share * np.sin(angle)).sum(axis=-1)
            pdf[part.rows] = (part.density * np.cos(angle)).sum(axis=-1)
        return cdf, pdf

    def quantile(self, probability: float, start: float = 2.0, within: float = 1e-10) -> Array:
        """x (R,) at which F is ``probability`` > ½: Newton, halving a bracket where it strays."""
        low, high = np.zeros(self.count), np.full(self.count, np.nan)
        for part in self.parts:
            high[part.rows] = part.reach
        x: Array = np.minimum(start, high)
        moving = np.isfinite(x)
        for _ in range(60):
            cdf, pdf = self.at(x)
            above = cdf > probability
            high = np.where(moving & above, x, high)
            low = np.where(moving & ~above, x, low)
            step = (cdf - probability) / np.maximum(pdf, 1e-300)
            new = np.where((x - step >= low) & (x - step <= high), x - step, 0.5 * (low + high))
            # A row stops by itself, so that the rows beside it cannot move its last digit.
            done = np.abs(new - x) <= within
            x = np.where(moving, new, x)
            moving = moving & ~done
            if not moving.any():
                break
        return x

    def table(self, x: Array) -> tuple[Array, Array]:
        """F and density (R, N) on a common grid x (N,), row by row so that no row depends on the others."""
        cdf, pdf = np.full((self.count, len(x)), np.nan), np.full((self.count, len(x)), np.nan)
        for part in self.parts:
            angle = part.omega[:, None] * np.clip(x, -part.reach, part.reach)
            cdf[part.rows] = 0.5 + (part.share[:, None, :] @ np.sin(angle))[:, 0]
            pdf[part.rows] = (part.density[:, None, :] @ np.cos(angle))[:, 0]
        return cdf, pdf


def linear_law(terms: Sequence[Term], live: NDArray[np.bool_], tail: float) -> LinearLaw:
    """The law of standardised rows; ``live`` (R,) rows have one; quantiles down to ``tail`` are resolved."""
    left = np.flatnonzero(live)
    reach = _ladder(_REACH, _quantile_bound(terms, len(live), tail), _REACH[-1])
    period = _ladder(_PERIODS, reach + _quantile_bound(terms, len(live), _BEYOND), np.inf)
    parts: list[_Part] = []
    for last in _LAST:
        dead = _envelope(terms, left, last) < np.log(_DEAD)
        if last == _LAST[-1]:
            dead[:] = True
        ready, left = left[dead], left[~dead]
        for far, repeat in sorted(set(zip(reach[ready].tolist(), period[ready].tolist(), strict=True))):
            rows = ready[(reach[ready] == far) & (period[ready] == repeat)]
            parts.append(_part(terms, rows, last, far, repeat))
        if not left.size:
            break
    return LinearLaw(count=len(live), parts=tuple(parts))


def _quantile_bound(terms: Sequence[Term], rows: int, tail: float) -> Array:
    """Upper bound (R,), roughly, of the quantile to a tail probability: t families reach far."""
    need = np.full(rows, 1.2 * float(-ndtri(tail)))
    for term in terms:
        if term.family.shape is Shape.NORMAL and not np.all(np.isinf(term.dof)):
            finite = np.isfinite(term.dof)
            t = stdtrit(np.where(finite, term.dof, 1.0), 1.0 - tail)
            need += np.where(finite, _length(term.size) * t, 0.0)
    return need


def _ladder(rungs: Sequence[float], need: Array, otherwise: float) -> Array:
    """The first rung not below each need, ``otherwise`` past the last."""
    steps: Array = np.asarray([*rungs, otherwise])
    return steps[np.searchsorted(rungs, need)]


def _length(size: Array) -> Array:
    square: Array = (size * size).sum(axis=-1)
    return np.sqrt(square)


def _envelope(terms: Sequence[Term], rows: Rows, omega: float) -> Array:
    """Upper bound of log |φ(ω)| (rows,), good enough to see where φ has died."""
    total = np.zeros(rows.size)
    for term in terms:
        size = np.abs(term.size[rows])
        if term.family.shape is Shape.NORMAL:
            total += _log_normal(term, rows, size, omega)
            continue
        # In doubt, the narrower half-widths die later.
        narrow = np.maximum(1.0 - sqrt(3.0) * term.doubt[rows], 0.1)[:, None]
        for width in _rectangles(term.family):
            y = size * narrow * (omega * width)
            total += np.where(y < 2.0, -y * y / 6.0, -np.log(np.maximum(y, 2.0))).sum(axis=-1)
        if term.family.shape is Shape.ARCSINE:
            y = sqrt(2.0) * omega * size * narrow
            total += np.where(y < 1.4, -0.25 * y * y, 0.5 * np.log(2.0 / (pi * np.maximum(y, 1.4)))).sum(
                axis=-1
            )
    return total


def _log_normal(term: Term, rows: Rows, size: Array, omega: float) -> Array:
    reach = omega * _length(size)
    nu = term.dof[rows]
    finite = np.isfinite(nu)
    heavy = np.log(np.maximum(student(np.where(finite, nu, 1.0), reach), 1e-300)) if finite.any() else 0.0
    return np.where(finite, heavy, -0.5 * reach * reach)


def _rectangles(family: Family) -> tuple[float, ...]:
    """Half-widths of the rectangles whose sum the shape is."""
    half = half_width(family.shape, family.top)
    match family.shape:
        case Shape.RECTANGULAR:
            return (half,)
        case Shape.TRIANGULAR:
            return (0.5 * half, 0.5 * half)
        case Shape.TRAPEZOIDAL:
            return (0.5 * half * (1.0 + family.top), 0.5 * half * (1.0 - family.top))
        case _:
            return ()


@lru_cache(maxsize=64)
def _grid(last: float, reach: float, period: float) -> tuple[Array, Array]:
    """Frequencies and weights (K,) of the midpoint rule, or of panels where the period is infinite.

    Panels have 16 nodes for less than four waves of sin(ωx). In the first half panel ω goes with the square of
    the node, which smooths the |ω|^ν of a t family.
    """
    if np.isfinite(period):
        step = 2.0 * pi / period
        omega = step * (np.arange(ceil(last / step)) + 0.5)
        weight = np.full(omega.size, step)
    else:
        panels = ceil(last * (reach + 6.0) / (2.0 * pi) / 3.6) + 1
        edges = np.concatenate([[0.5], np.arange(1.0, panels + 0.25)]) * (last / panels)
        half = 0.5 * np.diff(edges)[:, None]
        x = 0.5 * (1.0 + _NODES)
        omega = np.concatenate([edges[0] * x * x, (edges[:-1, None] + half * (1.0 + _NODES)).ravel()])
        weight = np.concatenate([edges[0] * x * _WEIGHTS, (half * _WEIGHTS).ravel()])
    grid: Array = np.stack([omega, weight])
    grid.setflags(write=False)
    return grid[0], grid[1]


def _part(terms: Sequence[Term], rows: Rows, last: float, reach: float, period: float) -> _Part:
    omega, weight = _grid(last, reach, period)
    phi = np.ones((rows.size, omega.size))
    squared = np.zeros(rows.size)
    for term in terms:
        if term.family.shape is Shape.NORMAL:
            squared += _times_normal(phi, term, rows, omega)
        elif np.any(term.doubt[rows]):
            _times_doubted(phi, term, rows, omega)
        else:
            _times_bounded(phi, term.family, np.abs(term.size[rows]), omega)
    phi *= np.exp(-0.5 * squared[:, None] * omega**2)
    if last == _LAST[-1]:
        half = 0.5 * (_DAMPING * omega) ** 2
        phi *= np.exp(-half) * (1.0 + half + 0.5 * half * half)
    density = phi * (weight / pi)
    return _Part(rows=rows, omega=omega, reach=reach, density=density, share=density / omega)


def _times_normal(phi: Array, term: Term, rows: Rows, omega: Array) -> Array:
    """Multiply t rows into φ; return the variances (rows,) of the normal ones."""
    length = _length(term.size[rows])
    nu = term.dof[rows]
    finite = np.isfinite(nu) & (length > 0)
    if finite.any():
        phi[finite] *= student(nu[finite, None], length[finite, None] * omega)
    return np.where(finite, 0.0, length * length)


def _times_doubted(phi: Array, term: Term, rows: Rows, omega: Array) -> None:
    """Multiply in a bounded family whose half-widths share a doubt: the mean over V."""
    size, r = np.abs(term.size[rows]), term.doubt[rows]
    mean = np.zeros_like(phi)
    for node, weight in zip(DOUBT_NODES, DOUBT_WEIGHTS, strict=True):
        one = np.full_like(phi, weight)
        _times_bounded(one, term.family, size * np.abs(1.0 + sqrt(3.0) * r * node)[:, None], omega)
        mean += one
    phi *= mean


def _times_bounded(phi: Array, family: Family, size: Array, omega: Array) -> None:
    """Multiply in members |S| (rows, G): large ones exactly, the many small ones by log φ to ω⁸."""
    large = size * half_width(family.shape, family.top) * omega[-1] > _SMALL
    small = np.where(large, 0.0, size)
    square = small * small
    fourth = square * square
    c4, c6, c8 = log_coefficients(family.shape, family.top)
    w2 = omega * omega
    two, four = square.sum(axis=-1)[:, None], fourth.sum(axis=-1)[:, None]
    six, eight = (fourth * square).sum(axis=-1)[:, None], (fourth * fourth).sum(axis=-1)[:, None]
    phi *= np.exp(w2 * (-0.5 * two + w2 * (c4 * four + w2 * (c6 * six + w2 * (c8 * eight)))))
    for member in np.flatnonzero(large.any(axis=0)):
        which = np.flatnonzero(large[:, member])
        phi[which] *= characteristic(family.shape, family.top, size[which, member, None] * omega)
