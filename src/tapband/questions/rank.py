"""Which sources and groups drive a coefficient: three answers side by side.

Linear shares of the variance; Sobol' indices of the groups; and what the interval would become if a group
were halved or removed, its coverage factor computed anew. P points, m coefficients, G groups, S sources.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Problem
from tapband.probability.distributions import effective_dof
from tapband.probability.linearised import Linearised, coverage_factor
from tapband.probability.sensitivity import Indices, group_order
from tapband.questions.rank_order import places
from tapband.questions.rank_reasons import differs, reasons

Array = NDArray[np.float64]
Codes = NDArray[np.int64]
LARGE = 1_000.0
"""Degrees of freedom from which t quantiles go by their expansion."""
HALF, NONE = 0.25, 0.0
"""What is left of a source's variance when it is halved or removed."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Ranking:
    """All (P, m, G); NaN where the coefficient has no value, shares 0 where no error acts on it."""

    groups: tuple[str, ...]
    share: Array
    halved: Array
    """Expanded uncertainty with the group's sources at half their size."""
    removed: Array
    indices: Indices | None
    rank: NDArray[np.int64]
    """By linear share; by total index at a point and coefficient where the two differ."""
    differs: NDArray[np.bool_]
    """Whether an index differs from the linear share by more than its interval."""
    note: NDArray[np.object_]
    """Why they differ, or why there is no index."""


def rank_groups(
    problem: Problem, linear: Linearised, groups: Sequence[str], level: float, indices: Indices | None = None
) -> Ranking:
    """Groups of sources ranked; ``groups`` names the group of each source, in ``indices`` too."""
    names, owner = group_order(groups)
    variance = linear.contribution**2
    nu = np.stack([effective_dof(family) for family in problem.families], axis=-1)[:, None, :]
    share = shares(variance, owner, len(names))
    halved, removed = (
        np.stack(
            [expanded(variance * np.where(owner == g, left, 1.0), nu, level) for g in range(len(names))],
            axis=-1,
        )
        for left in (HALF, NONE)
    )
    unlike = np.zeros(share.shape, dtype=np.bool_)
    note = np.full(share.shape, "", dtype=object)
    by = share
    if indices is not None:
        unlike = differs(share, indices)
        note = reasons(share, indices, problem, owner)
        by = np.where(unlike.any(axis=2, keepdims=True), indices.total, share)
    return Ranking(
        groups=names, share=share, halved=halved, removed=removed, indices=indices, rank=places(by),
        differs=unlike, note=note,
    )  # fmt: skip


def shares(variance: Array, owner: Codes, groups: int) -> Array:
    """(P, m, G) shares of variances (P, m, S); they sum to 1, or are all 0 where nothing acts."""
    by_group = np.zeros((*variance.shape[:2], groups))
    for s, g in enumerate(owner.tolist()):
        by_group[..., g] += variance[..., s]
    whole = by_group.sum(axis=2, keepdims=True)
    share = np.divide(by_group, whole, out=np.zeros_like(by_group), where=whole > 0.0)
    return np.where(np.isnan(whole), np.nan, share)


def expanded(variance: Array, nu: Array, level: float) -> Array:
    """U (P, m) from variances (P, m, S) with degrees of freedom ``nu`` that broadcast against them.

    *Source* JCGM 100:2008, G.4.1, eq. G.2b, ν not truncated.
    """
    total = variance.sum(axis=-1)
    part = np.divide(variance, total[..., None], out=np.zeros_like(variance), where=total[..., None] > 0.0)
    terms = (part**2 / nu).sum(axis=-1)
    dof = np.divide(1.0, terms, out=np.full(terms.shape, np.inf), where=terms > 0.0)
    return np.asarray(_factors(dof, level) * np.sqrt(total))


def _factors(dof: Array, level: float) -> Array:
    """Coverage factors in the shape of ``dof``; many large ν by the expansion about the normal quantile.

    From ν = 1000 on its first four terms are within 2e-13 of the t quantile up to a level of 99.99 %.

    *Source* Abramowitz and Stegun, 26.7.5.
    """
    z = float(coverage_factor(np.inf, level))
    terms = (
        (z**3 + z) / 4.0,
        (5.0 * z**5 + 16.0 * z**3 + 3.0 * z) / 96.0,
        (3.0 * z**7 + 19.0 * z**5 + 17.0 * z**3 - 15.0 * z) / 384.0,
        (79.0 * z**9 + 776.0 * z**7 + 1482.0 * z**5 - 1920.0 * z**3 - 945.0 * z) / 92160.0,
    )
    few = dof < LARGE
    r = 1.0 / np.where(few, np.inf, dof)
    k = z + r * (terms[0] + r * (terms[1] + r * (terms[2] + r * terms[3])))
    k[few] = coverage_factor(dof[few], level)
    return np.asarray(k)
