"""The sums of Jansen's estimator with the linear model taken out, for one block of points.

With l = S ξ, y = y₀ + l + r and Δ a difference between a sample and its mixture with another,

    ½ (Δy)² = ½ (Δl)² + Δl Δr + ½ (Δr)²,

and the mean of the first term is known exactly, so that only what is not linear is left to sampling. All
shapes are symmetric, so every draw is used with both signs: products of l with even parts of r drop out.

Pb points, m outputs, G groups, n mirrored pairs. A design runs A, B, then A with each group in turn from B.

*Source* Jansen, Computer Physics Communications 117 (1999) 35; Saltelli et al., Computer Physics
Communications 181 (2010) 259, table 2, rows c (first order) and f (total), from memory.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

from tapband.nouns.problem import Family, Problem
from tapband.probability.distributions import variance
from tapband.probability.draws import block

Array = NDArray[np.float64]
Codes = NDArray[np.int64]
Mask = NDArray[np.bool_]

LEVEL = 0.95
"""Confidence of the intervals of the indices, as SALib's default."""
ROUNDING = 1e-14
"""An output that moves by less than this part of its value (or of 1) does not move."""
SKEW = 3.0
"""Skewness that the intervals allow for: a squared normal has 2.8."""
SIGN = np.array([1.0, -1.0])[:, None, None]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Design:
    """What all blocks share: the problem, the group (S,) of each family, and the linear variance by group."""

    problem: Problem
    owner: Codes
    groups: int
    seed: int
    exact: Array
    """(P, m, G)."""

    @classmethod
    def of(cls, problem: Problem, owner: Codes, groups: int, seed: int) -> Design:
        """The design of a problem."""
        by_source = linear_variance(problem.families, problem.sensitivity, problem.estimate.shape)
        exact = np.zeros((*problem.estimate.shape, groups))
        for s, g in enumerate(owner):
            exact[..., g] += by_source[..., s]
        return cls(problem=problem, owner=owner, groups=groups, seed=seed, exact=exact)


def linear_variance(
    families: Sequence[Family], sensitivity: Sequence[Array], shape: tuple[int, ...]
) -> Array:
    """(P, m, S) variance of the linear model by source, with the latents' true variances.

    A t distribution counts ν/(ν − 2) here (NaN up to ν = 2), a doubted half-width 1 + r², where the law of
    propagation counts 1.
    """
    result = np.zeros((*shape, len(families)))
    for s, (family, columns) in enumerate(zip(families, sensitivity, strict=True)):
        square = np.sum(np.ascontiguousarray(columns) ** 2, axis=-1)
        result[..., s] = np.where(square > 0.0, square * variance(family)[:, None], 0.0)
    return result


@dataclass(frozen=True, kw_only=True, eq=False)
class Sums:
    """Terms of each mirrored pair, (Pb, m, n) or (Pb, m, G, n); NaN where an evaluation was refused."""

    variance: Array
    without: Array
    """½ (y(B) − y(AB))², whose mean is the variance that all other groups make."""
    through: Array
    """½ (y(A) − y(AB))², whose mean is the variance that the group takes part in."""
    failed: NDArray[np.int64]
    """(Pb, m) evaluations refused."""
    still: Mask
    """(Pb, m) outputs that do not move."""

    @cached_property
    def spread(self) -> Array:
        """Variance (Pb, m) of each output."""
        return np.where(self.still, np.nan, self.variance.mean(axis=-1))

    @cached_property
    def indices(self) -> dict[str, Array]:
        """Indices and the half-widths of their intervals (Pb, m, G); a ratio's error to first order."""
        whole = self.spread[:, :, None]
        each, own = self.variance[:, :, None, :], 1.0 / whole[..., None]
        first = (whole - self.without.mean(axis=-1)) / whole
        total = self.through.mean(axis=-1) / whole
        return {
            "first": first,
            "first_ci": _half_width((each - self.without - first[..., None] * each) * own),
            "total": total,
            "total_ci": _half_width((self.through - total[..., None] * each) * own),
        }


def _half_width(terms: Array) -> Array:
    """Half-width of the interval of the mean over the last axis.

    The terms are squares and products, skewed to about SKEW; the quantile is widened by what skewness takes
    from it, SKEW (1 + 2 t²)/(6 √n).

    *Source* Johnson, J. Am. Stat. Assoc. 73 (1978) 536, eq. 2.6, from memory.
    """
    n = terms.shape[-1]
    t = float(stdtrit(n - 1, 0.5 + 0.5 * LEVEL))
    t += SKEW * (1.0 + 2.0 * t * t) / (6.0 * np.sqrt(n))
    return np.asarray(t * terms.std(axis=-1, ddof=1) / np.sqrt(n))


def sums_of(design: Design, points: range, half: int, tiles: int) -> Sums:
    """The sums of ``tiles`` tiles of ``half`` mirrored pairs at a block of points."""
    where = slice(points.start, points.stop)
    drawn = [_tile(design, points, half, tile) for tile in range(tiles)]
    y = np.concatenate([one[0] for one in drawn], axis=-1)
    by_group = np.concatenate([one[1] for one in drawn], axis=-1)
    with np.errstate(invalid="ignore"):
        variance, without, through = _terms(y, by_group, design.exact[where])
        level = ROUNDING * (1.0 + np.abs(design.problem.estimate[where]))
        still = ~(variance.mean(axis=-1) > level**2)
    failed = np.isnan(y).sum(axis=(2, 3, 4))
    failed[np.isnan(design.problem.estimate[where])] = 0
    return Sums(variance=variance, without=without, through=through, failed=failed, still=still)


def _tile(design: Design, points: range, half: int, tile: int) -> tuple[Array, Array]:
    """y − y₀ (Pb, m, 2, G + 2, half), signs first, and S ξ by group (Pb, m, 2, G, half), A first."""
    problem, groups, where = design.problem, design.groups, slice(points.start, points.stop)
    families = [_part(family, where) for family in problem.families]
    every, rows = range(len(families)), range(len(points))
    a = block(families, every, rows, design.seed, 2 * tile, half)
    b = block(families, every, rows, design.seed, 2 * tile + 1, half)
    draws: dict[int, Array] = {}
    by_group = np.zeros((len(points), problem.estimate.shape[1], 2, groups, half))
    for f, g in enumerate(design.owner.tolist()):
        mixed = np.empty((len(a[f]), 2, groups + 2, *a[f].shape[1:]))
        mixed[:, 0] = a[f][:, None]
        mixed[:, 0, 1] = mixed[:, 0, 2 + g] = b[f]
        np.negative(mixed[:, 0], out=mixed[:, 1])
        draws[f] = mixed.reshape(len(mixed), -1, mixed.shape[-1])
        for side, values in enumerate((a[f], b[f])):
            by_group[:, :, side, g] += problem.sensitivity[f][where] @ values.swapaxes(1, 2)
    y = problem.evaluate(where, draws) - problem.estimate[where][:, None, :]
    return np.moveaxis(y.reshape(len(y), 2, groups + 2, half, -1), -1, 1), by_group


def _part(family: Family, where: slice) -> Family:
    return replace(
        family,
        point_group=family.point_group[where],
        scale_group=family.scale_group[where],
        dof=family.dof[where],
    )


def _terms(y: Array, by_group: Array, exact: Array) -> tuple[Array, Array, Array]:
    """Variance (Pb, m, n) and the two halved squares (Pb, m, G, n), each pair's mean of both signs."""
    whole = by_group.sum(axis=3)
    keep = _helps(y, whole)
    whole, by_group = whole * keep[..., None, None], by_group * keep[..., None, None, None]
    exact = exact * keep[..., None]
    mixed = whole[:, :, :1] - by_group[:, :, 0] + by_group[:, :, 1]
    line = SIGN * np.concatenate([whole, mixed], axis=2)[:, :, None]
    rest = y - line
    even = 0.5 * (rest[:, :, 0, :2] + rest[:, :, 1, :2])
    mean = even.mean(axis=(-2, -1))
    # The square of a mean is too large by the variance of that mean; the mirrored pairs are independent.
    bias = even.var(axis=(-2, -1), ddof=1) / (2 * even.shape[-1])
    base, bent = line[:, :, :, :2], rest[:, :, :, :2] - mean[..., None, None, None]
    variance = (bent * (2.0 * base + bent)).mean(axis=(2, 3)) + (exact.sum(axis=-1) + bias)[..., None]
    others = exact.sum(axis=-1, keepdims=True) - exact
    return variance, others[..., None] + _bent(line, rest, 1), exact[..., None] + _bent(line, rest, 0)


def _bent(line: Array, rest: Array, side: int) -> Array:
    """Δl Δr + ½ (Δr)² between A or B (``side``) and each mixture, the mean of both signs: (Pb, m, G, n)."""
    moved = line[:, :, :, side : side + 1] - line[:, :, :, 2:]
    bent = rest[:, :, :, side : side + 1] - rest[:, :, :, 2:]
    return np.asarray((bent * (moved + 0.5 * bent)).mean(axis=2))


def _helps(y: Array, whole: Array) -> Array:
    """(Pb, m) 1 where what the linear model leaves scatters less than the output itself, else 0."""
    base = y[:, :, :, :2]
    rest = base - SIGN * whole[:, :, None]
    return np.where(rest.var(axis=(2, 3, 4)) <= base.var(axis=(2, 3, 4)), 1.0, 0.0)
