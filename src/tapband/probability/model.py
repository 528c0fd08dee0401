"""A problem with its linear model at hand: what never changes while trials run."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Family, Problem
from tapband.nouns.source import Shape
from tapband.probability.coverage import ROUNDING
from tapband.probability.distributions import variance
from tapband.probability.linear_law import LinearLaw, Term, linear_law

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_NEGLIGIBLE = 1e-12
"""Share of variance below which a contribution is rounding (a common zero error on a closed contour)."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Moments:
    """Whether mean and standard deviation of outputs (m,) exist, and finite variances of their estimates."""

    mean: Mask
    u: Mask
    mean_scatter: Mask
    u_scatter: Mask


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Model:
    """P points, m outputs, S families."""

    problem: Problem
    families: tuple[Family, ...]
    sensitivity: tuple[Array, ...]
    estimate: Array
    share: Array
    """(P, m, S) of the variance; 0 where there is none."""
    u: Array
    """(P, m)"""
    live: Mask
    """(P, m) rows with an estimate that some error moves by more than rounding."""
    affine: Mask

    @classmethod
    def of(cls, problem: Problem) -> Model:
        """From a problem."""
        families = tuple(problem.families)
        estimate = np.asarray(problem.estimate, dtype=np.float64)
        # A derivative that does not exist (none of an output without an estimate does) counts as none at all: such
        # an output is left out, or left to plain trials.
        sensitivity = tuple(
            s if np.isfinite(s).all() else np.where(np.isfinite(s), s, 0.0) for s in problem.sensitivity
        )
        parts = np.zeros((*estimate.shape, len(families)))
        for f, columns in enumerate(sensitivity):
            parts[..., f] = (columns * columns).sum(axis=-1)
        total = np.zeros(estimate.shape)
        for f in range(len(families)):
            total += parts[..., f]
        u = np.sqrt(total)
        largest = np.where(np.isnan(estimate), 0.0, np.maximum(np.abs(estimate), u)).max(axis=1, initial=0.0)
        live = np.isfinite(estimate) & (u > ROUNDING * largest[:, None])
        share = np.where(live[..., None], parts / np.where(live, total, 1.0)[..., None], 0.0)
        return cls(
            problem=problem, families=families, sensitivity=sensitivity, estimate=estimate, share=share,
            u=u, live=live, affine=np.asarray(problem.affine, dtype=np.bool_),
        )  # fmt: skip

    def law(self, points: range, live: Mask, which: tuple[int, ...], tail: float) -> LinearLaw:
        """Exact law of Σ S ξ over the families ``which``, rows (Pb·m) in units of their own deviation."""
        rows = slice(points.start, points.stop)
        outputs = self.estimate.shape[1]
        part = np.zeros(live.shape)
        for f in which:
            part += self.share[rows, :, f]
        unit = np.where(live, self.u[rows] * np.sqrt(np.where(live, part, 1.0)), 1.0)
        terms = []
        for f in which:
            size = (self.sensitivity[f][rows] / unit[..., None]).reshape(live.size, -1)
            dof = np.repeat(self.families[f].dof[rows], outputs)
            terms.append(
                Term(family=self.families[f], size=size, dof=dof, doubt=_doubts(self.families[f], dof))
            )
        return linear_law(terms, live.ravel(), tail)

    def moments(self, point: int, out: tuple[int, ...] = ()) -> Moments:
        """Which moments of each output (m,) exist, and which averages over draws have a scatter of their own.

        A source of ν degrees of freedom has moments below ν. Sources ``out`` are not drawn: they do not scatter.
        """
        least, drawn = np.full((2, self.u.shape[1]), np.inf)
        for f, family in enumerate(self.families):
            nu = family.dof[point]
            if family.shape is Shape.NORMAL and nu <= 4.0:
                there = self.share[point, :, f] > _NEGLIGIBLE
                least = np.where(there, np.minimum(least, nu), least)
                if f not in out:
                    drawn = np.where(there, np.minimum(drawn, nu), drawn)
        return Moments(mean=least > 1.0, u=least > 2.0, mean_scatter=drawn > 2.0, u_scatter=drawn > 4.0)

    def variance(self, points: range, which: tuple[int, ...]) -> Array:
        """Variance (Pb, m) of the linear model over some families, as far as it exists."""
        rows = slice(points.start, points.stop)
        total = np.zeros((len(points), self.estimate.shape[1]))
        for f in which:
            spread = np.where(self.share[rows, :, f] > 0.0, variance(self.families[f])[rows, None], 0.0)
            total += self.share[rows, :, f] * spread
        return total * self.u[rows] ** 2


def _doubts(family: Family, dof: Array) -> Array:
    if family.shape is Shape.NORMAL:
        return np.zeros(dof.shape)
    return np.full(dof.shape, family.reliability) if family.reliability > 0.0 else np.sqrt(0.5 / dof)
