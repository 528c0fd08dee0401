"""Linear combinations of coefficients across points, and their uncertainty from the latents points share.

R rows of q quantities each. A quantity is Σ over terms n of weight_n · y(point_n) + on_alpha_n ·
alpha(point_n). Only sums per row, source and point group are formed: the cost grows with the number of terms.

*Source* JCGM 100:2008, 5.2.2 and F.1.2.3 (errors in common correlate), G.4 (Welch-Satterthwaite).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.probability.linearised import coverage_factor
from tapband.questions.latents import Latents

Array = NDArray[np.float64]
Codes = NDArray[np.int64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Combination:
    """N terms: the row (N,) and point (N,) of each, and weights (N, q, m).

    ``on_alpha`` and ``on_centre`` (N, q) are the weights of the errors of alpha [per rad] and of the moment
    centre.
    """

    rows: int
    row: Codes
    point: Codes
    weight: Array
    on_alpha: Array
    on_centre: Array | None = None

    @property
    def quantities(self) -> int:
        """q."""
        return int(self.weight.shape[1])

    def only(self, rows: Codes) -> Combination:
        """Some rows alone, in increasing order."""
        kept = np.isin(self.row, rows)
        return Combination(
            rows=rows.size,
            row=np.searchsorted(rows, self.row[kept]),
            point=self.point[kept],
            weight=self.weight[kept],
            on_alpha=self.on_alpha[kept],
            on_centre=None if self.on_centre is None else self.on_centre[kept],
        )

    def value(self, latents: Latents) -> Array:
        """(R, q) of the coefficients alone."""
        total = np.zeros((self.rows, self.quantities))
        y = _finite(latents.estimate[self.point])
        np.add.at(total, self.row, (self.weight @ y[:, :, None])[:, :, 0])
        return total


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Spread:
    """How far the quantities of R rows may be off; S sources and, behind them, further terms."""

    covariance: Array
    """(R, q, q)."""
    variance: Array
    """(R, q, S)."""
    independent: Array
    """(R, q) variance if errors were called independent between points."""
    welch: Array
    """(R, q) Σ of variance²/ν, a term for each source and scale."""

    @property
    def u(self) -> Array:
        """(R, q) combined standard uncertainty."""
        return np.asarray(np.sqrt(self.variance.sum(axis=2)))

    @property
    def dof(self) -> Array:
        """(R, q) effective degrees of freedom, inf where exactly known."""
        total = self.variance.sum(axis=2)
        infinite = np.full(total.shape, np.inf)
        return np.asarray(np.divide(total**2, self.welch, out=infinite, where=self.welch > 0.0))

    def k(self, level: float) -> Array:
        """(R, q) coverage factors."""
        return coverage_factor(self.dof, level)

    def plus(self, variance: Array) -> Spread:
        """With a further exactly known, independent term (R, q)."""
        diagonal = variance[:, :, None] * np.eye(variance.shape[1])
        return Spread(
            covariance=self.covariance + diagonal,
            variance=np.concatenate([self.variance, variance[:, :, None]], axis=2),
            independent=self.independent + variance,
            welch=self.welch,
        )


def spread(latents: Latents, combination: Combination) -> Spread:
    """The uncertainty of every row."""
    rows, q, sources = combination.rows, combination.quantities, len(latents.sources)
    covariance, independent = np.zeros((rows, q, q)), np.zeros((rows, q))
    variance, welch = np.zeros((rows, q, sources)), np.zeros((rows, q))
    for s in range(sources):
        terms = projected(latents, combination, s)
        independent_of_term = (terms * terms).sum(axis=2)
        np.add.at(independent, combination.row, independent_of_term)
        sums, row, point = grouped(terms, combination, latents.group[s])
        squares = sums @ np.swapaxes(sums, 1, 2)
        np.add.at(covariance, row, squares)
        own = np.einsum("uqq->uq", squares)
        np.add.at(variance[:, :, s], row, own)
        nu = latents.dof[s]
        if not np.all(np.isinf(nu[point])):
            pooled, pooled_row, first = _summed(own, row, latents.scale[s][point], point)
            np.add.at(welch, pooled_row, pooled**2 / nu[first][:, None])
    return Spread(covariance=covariance, variance=variance, independent=independent, welch=welch)


def projected(latents: Latents, combination: Combination, source: int) -> Array:
    """(N, q, G) what the latents of one source add to the quantities, a term at a time."""
    terms = combination.weight @ _finite(latents.sensitivity[source][combination.point])
    if source in latents.on_alpha:
        moved = latents.on_alpha[source][combination.point]
        terms = terms + combination.on_alpha[:, :, None] * moved[:, None, :]
    if combination.on_centre is not None and source in latents.on_centre:
        moved = latents.on_centre[source][combination.point]
        terms = terms + combination.on_centre[:, :, None] * moved[:, None, :]
    return np.asarray(terms)


def grouped(terms: Array, combination: Combination, codes: Codes) -> tuple[Array, Codes, Codes]:
    """Terms (N, …) summed over points of a row that share latents: sums (U, …), rows, and a point of each."""
    return _summed(terms, combination.row, codes[combination.point], combination.point)


def _summed(terms: Array, row: Codes, codes: Codes, point: Codes) -> tuple[Array, Codes, Codes]:
    key = row.astype(np.int64) * (int(codes.max(initial=0)) + 1) + codes
    order = np.argsort(key, kind="stable")
    starts = np.flatnonzero(np.diff(key[order], prepend=-1))
    sums = np.add.reduceat(terms[order], starts, axis=0)
    first = order[starts]
    return sums, row[first], point[first]


def _finite(values: Array) -> Array:
    """Zero where a coefficient has no value; callers blank those rows."""
    return np.where(np.isfinite(values), values, 0.0)
