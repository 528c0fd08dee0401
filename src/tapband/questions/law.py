"""The exact law of linear combinations across points, and what a few joint trials change of it.

The combinations are nearly linear in the latents, whose law is known: an end of an interval is that of the
linear model, moved by the mean difference of the true value to it there. That mean is a parabola fitted to
joint trials, so that tens of them do; where it is no small correction the trials themselves are counted.

*Source* for a quantile under a small change r of the variable: q + E(r | q) + ½ q var(r)/u² (Cornish and
Fisher, Revue Inst. Int. Stat. 5 (1938) 307, to first and second order, from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Family
from tapband.nouns.source import Shape
from tapband.probability.coverage import symmetric_of, tolerance
from tapband.probability.distributions import doubt
from tapband.probability.linear_law import LinearLaw, Term, linear_law
from tapband.questions.combine import Combination, grouped, projected
from tapband.questions.latents import Latents

Array = NDArray[np.float64]
Codes = NDArray[np.int64]
Mask = NDArray[np.bool_]
TOGETHER = 2_000_000
"""Sensitivities held at once for the law."""
NEARLY = 0.2
"""Root mean square difference to the linear model, in u, that is a small correction."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Drawn:
    """Monte Carlo intervals (R, q) with the numerical standard deviations of their ends; NaN: none."""

    low: Array
    high: Array
    low_sd: Array
    high_sd: Array
    nearly: Mask
    """Where the linear law with a small correction holds."""

    @classmethod
    def none(cls, shape: tuple[int, int]) -> Drawn:
        """No interval anywhere."""
        nothing = np.full(shape, np.nan)
        return cls(
            low=nothing, high=nothing, low_sd=nothing, high_sd=nothing, nearly=np.ones(shape, dtype=np.bool_)
        )

    def agrees(self, low: Array, high: Array, u: Array) -> Mask:
        """Whether linearised ends are confirmed (JCGM 101:2008, 8.1): within δ of u and twice the noise."""
        delta = tolerance(u)
        return np.asarray(
            (np.abs(low - self.low) <= delta + 2.0 * self.low_sd)
            & (np.abs(high - self.high) <= delta + 2.0 * self.high_sd)
        )


def reaches(
    families: Sequence[Family],
    latents: Latents,
    combination: Combination,
    u: Array,
    half: Array,
    level: float,
) -> Array:
    """x (R, q) with P(|quantity − estimate| ≤ x u) = ``level`` by the linear model; NaN where u is zero.

    Rows of about as many terms are done together, so that a long row does not widen short ones.
    """
    sizes = np.bincount(combination.row, minlength=combination.rows)
    found = np.full(u.shape, np.nan)
    widest = max((s.shape[2] for s in latents.sensitivity), default=1)
    order = np.argsort(sizes, kind="stable")
    start = 0
    while start < order.size:
        stop = start + 1
        while stop < order.size and (
            (stop + 1 - start) * int(sizes[order[stop]]) * widest * u.shape[1] <= TOGETHER
        ):
            stop += 1
        rows = np.sort(order[start:stop])
        law = law_of(families, latents, combination.only(rows), u[rows], half[rows], level)
        found[rows] = law.quantile(0.5 * (1.0 + level)).reshape(rows.size, -1)
        start = stop
    return found


def law_of(
    families: Sequence[Family],
    latents: Latents,
    combination: Combination,
    u: Array,
    half: Array,
    level: float,
) -> LinearLaw:
    """The law of the R q standardised quantities, row by row, by the linear model; none where u is zero.

    ``u`` and ``half`` (R, q): the latter is the half-width of a further rectangular term, which u includes.
    Quantiles as far out as ``level`` asks are resolved.
    """
    unit = np.where(u > 0.0, u, np.inf)
    terms: list[Term] = []
    for s, family in enumerate(families):
        terms += _terms(family, latents, combination, s, unit)
    rows = u.size
    extra = Family(
        source="", members=("",), point_group=("",), scale_group=("",), shape=Shape.RECTANGULAR,
        dof=np.array([np.inf]),
    )  # fmt: skip
    width = (half / np.sqrt(3.0) / unit).reshape(rows, 1)
    terms.append(Term(family=extra, size=width, dof=np.full(rows, np.inf), doubt=np.zeros(rows)))
    return linear_law(terms, (np.isfinite(u) & (u > 0.0)).ravel(), 0.5 * (1.0 - level))


def _terms(
    family: Family, latents: Latents, combination: Combination, source: int, unit: Array
) -> list[Term]:
    """One term for each scale that occurs in a row: its latents there, in units of the rows' u."""
    raw = projected(latents, combination, source)
    if not raw.any():
        return []
    sums, row, point = grouped(raw, combination, latents.group[source])
    sums = sums / unit[row][:, :, None]
    slot = _within(row, latents.scale[source][point])
    found = []
    for j in range(int(slot.max()) + 1):
        mine = np.flatnonzero(slot == j)
        if family.shape is Shape.NORMAL:
            squares = np.zeros((combination.rows, combination.quantities))
            np.add.at(squares, row[mine], np.sum(sums[mine] ** 2, axis=2))
            size = np.sqrt(squares)[:, :, None]
        else:
            size = _side_by_side(sums[mine], row[mine], combination.rows)
        dof, r = np.full(combination.rows, np.inf), np.zeros(combination.rows)
        if not family.exact:
            dof[row[mine]] = family.dof[point[mine]]
            r[row[mine]] = [doubt(family, int(p)) for p in point[mine]]
        q = combination.quantities
        found.append(
            Term(
                family=family,
                size=size.reshape(-1, size.shape[2]),
                dof=np.repeat(dof, q),
                doubt=np.repeat(r, q),
            )
        )
    return found


def _within(row: Codes, codes: Codes) -> Codes:
    """Number of each code among the codes of its row, from 0."""
    pairs, place = np.unique(np.stack([row, codes], axis=1), axis=0, return_inverse=True)
    first = np.searchsorted(pairs[:, 0], pairs[:, 0])
    return np.asarray((np.arange(len(pairs)) - first)[place.ravel()])


def _side_by_side(sums: Array, row: Codes, rows: int) -> Array:
    """(U, q, G) with their rows -> (R, q, n G), zeros where a row has fewer."""
    order = np.argsort(row, kind="stable")
    ordered = row[order]
    place = np.arange(row.size) - np.searchsorted(ordered, ordered)
    q, g = sums.shape[1:]
    result = np.zeros((rows, int(place.max()) + 1, q, g))
    result[ordered, place] = sums[order]
    return np.swapaxes(result, 1, 2).reshape(rows, q, -1)


def corrected(value: Array, u: Array, reach: Array, linear: Array, true: Array) -> Drawn:
    """Intervals from the linear law and trials: what the linear model and the equation moved the value by.

    ``value``, ``u``, ``reach`` (R, q); ``linear``, ``true`` (R, q, N). A refused trial is NaN and left out.
    """
    unit = np.where(u > 0.0, u, 1.0)[..., None]
    x = linear / unit
    good = np.isfinite(true) & np.isfinite(x)
    r = np.where(good, true - linear, 0.0) / unit
    basis = np.stack([np.ones_like(x), x, x * x], axis=-1) * good[..., None]
    matrix = np.swapaxes(basis, -1, -2) @ basis + 1e-12 * np.eye(3)
    inverse = np.linalg.inv(matrix)
    c = (inverse @ (np.swapaxes(basis, -1, -2) @ r[..., None]))[..., 0]
    left = r - (basis @ c[..., None])[..., 0]
    count = good.sum(axis=-1)
    variance = (left * left * good).sum(axis=-1) / np.maximum(count - 3, 1)
    ends = []
    for sign in (-1.0, 1.0):
        at = sign * reach
        here = np.stack([np.ones_like(at), at, at * at], axis=-1)
        moved = (here * c).sum(axis=-1) + 0.5 * at * variance
        noise = np.sqrt(variance * ((here[..., None, :] @ inverse)[..., 0, :] * here).sum(axis=-1))
        ends.append((value + u * (at + moved), u * noise))
    rough = np.sqrt((r * r).sum(axis=-1) / np.maximum(count, 1))
    return Drawn(
        low=ends[0][0],
        high=ends[1][0],
        low_sd=ends[0][1],
        high_sd=ends[1][1],
        nearly=(rough < NEARLY) & (count > 8),
    )


def counted(value: Array, true: Array, level: float) -> Drawn:
    """Intervals from the trials alone, (R, q) from ``true`` (R, q, N); finite ones only."""
    shape = value.shape
    found = Drawn.none(shape)
    ends = np.full((4, *shape), np.nan)
    for r, q in np.ndindex(*shape):
        moved = true[r, q][np.isfinite(true[r, q])]
        if moved.size < 40:
            continue
        ordered = np.sort(moved)
        low, high = symmetric_of(ordered, level)
        # Half the spread of the quantiles one standard deviation of their own probability apart.
        step = np.sqrt(0.25 * (1.0 - level**2) / ordered.size)
        inner, outer = (symmetric_of(ordered, float(np.clip(level + s * 2 * step, 0, 1))) for s in (-1, 1))
        ends[:, r, q] = (
            value[r, q] + low,
            value[r, q] + high,
            0.5 * abs(outer[0] - inner[0]),
            0.5 * abs(outer[1] - inner[1]),
        )
    return Drawn(low=ends[0], high=ends[1], low_sd=ends[2], high_sd=ends[3], nearly=found.nearly)
