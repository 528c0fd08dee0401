"""The law of propagation of uncertainty through independent latents, for many points at once.

P points, m outputs, S families (sources), G latents of one family.

*Source* JCGM 100:2008, 5.1.2 and 5.2.2 (latents are independent, so correlation between outputs and points
is in the sensitivities), G.4 (Welch-Satterthwaite), G.6 (expanded uncertainty).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtri, stdtrit

from tapband.nouns.problem import Family, Problem
from tapband.probability.distributions import effective_dof

Array = NDArray[np.float64]

_NORMAL_FROM = 1e9
"""Degrees of freedom from which t and normal quantiles agree to rounding of any printed digit."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Linearised:
    """What linearised propagation says; all (P, m) unless stated. NaN where there is no estimate."""

    estimate: Array
    u: Array
    """Combined standard uncertainty."""
    systematic: Array
    random: Array
    dof: Array
    """Effective degrees of freedom, not truncated to an integer as JCGM 100, G.4.1 does; inf where exact."""
    k: Array
    U: Array
    low: Array
    high: Array
    covariance: Array
    """(P, m, m)"""
    contribution: Array
    """(P, m, S), signless standard uncertainties in the output, in the order of the families."""


def propagate(problem: Problem, level: float) -> Linearised:
    """Everything of :class:`Linearised` at the level of confidence ``level``."""
    estimate = np.asarray(problem.estimate, dtype=np.float64)
    families, sensitivity = problem.families, problem.sensitivity
    variances = _variances(estimate, sensitivity)
    void = np.isnan(estimate)
    variances[void] = np.nan
    systematic = np.array([family.systematic for family in families], dtype=bool)
    u = np.sqrt(_ordered_sum(variances))
    dof = _welch_satterthwaite(families, variances)
    k = coverage_factor(dof, level)
    U = k * u
    return _frozen(
        Linearised(
            estimate=estimate,
            u=u,
            systematic=np.sqrt(_ordered_sum(variances[..., systematic])),
            random=np.sqrt(_ordered_sum(variances[..., ~systematic])),
            dof=dof,
            k=k,
            U=U,
            low=estimate - U,
            high=estimate + U,
            covariance=_covariance(estimate, sensitivity),
            contribution=np.sqrt(variances),
        )
    )


def coverage_factor(dof: ArrayLike, level: float) -> Array:
    """k = t_(1+p)/2(ν), ν not truncated (JCGM 100:2008, G.3.4); NaN stays NaN."""
    nu = np.asarray(dof, dtype=np.float64)
    exact = nu >= _NORMAL_FROM
    k = np.where(exact, ndtri(0.5 * (1.0 + level)), stdtrit(np.where(exact, 1.0, nu), 0.5 * (1.0 + level)))
    return np.where(np.isnan(nu), np.nan, k)


def cross_covariance(
    families: Sequence[Family], sensitivity: Sequence[Array], a: ArrayLike, b: ArrayLike
) -> Array:
    """Covariance (..., m, m) of the outputs at points ``a`` with those at points ``b``.

    ``a`` and ``b`` are indices that broadcast against each other, so that only what is asked is formed: two
    numbers, a list of pairs, or ``a[:, None]`` with ``b[None, :]`` for a dense table.

    Σ over the latents that both points share of S_a S_bᵀ: a family counts where the point groups are equal.
    """
    first, second = np.broadcast_arrays(np.asarray(a, dtype=np.intp), np.asarray(b, dtype=np.intp))
    m = sensitivity[0].shape[1] if sensitivity else 0
    total = np.zeros((*first.shape, m, m))
    for family, columns in zip(families, sensitivity, strict=True):
        group = group_codes(family)
        shared = group[first] == group[second]
        if np.any(shared):
            left, right = columns[first[shared]], columns[second[shared]]
            total[shared] += left @ np.swapaxes(right, -1, -2)
    return total


def group_codes(family: Family) -> NDArray[np.intp]:
    """Point groups (P,) as numbers, equal where the points share the family's latents."""
    codes: dict[str, int] = {}
    return np.array([codes.setdefault(group, len(codes)) for group in family.point_group], dtype=np.intp)


def _variances(estimate: Array, sensitivity: Sequence[Array]) -> Array:
    """Variance (P, m, S) that each family adds."""
    result = np.zeros((*estimate.shape, len(sensitivity)))
    for index, columns in enumerate(sensitivity):
        block = np.ascontiguousarray(columns)
        result[..., index] = (block * block).sum(axis=-1)
    return result


def _ordered_sum(variances: Array) -> Array:
    """Sum over families one after another, so that a row does not depend on the number of points."""
    total = np.zeros(variances.shape[:-1])
    for index in range(variances.shape[-1]):
        total += variances[..., index]
    return total


def _welch_satterthwaite(families: Sequence[Family], variances: Array) -> Array:
    """ν = u⁴ / Σ S_s⁴/ν_s, one term a family: its latents share one estimate of scale.

    *Source* JCGM 100:2008, G.4.1, eq. G.2b, without the truncation to an integer.
    """
    total = _ordered_sum(variances)
    shares = np.divide(variances, total[..., None], out=np.zeros_like(variances), where=total[..., None] > 0)
    terms = np.zeros_like(total)
    for index, family in enumerate(families):
        terms += shares[..., index] ** 2 / effective_dof(family)[:, None]
    dof = np.divide(1.0, terms, out=np.full(terms.shape, np.inf), where=terms > 0)
    return np.where(np.isnan(total), np.nan, dof)


def _covariance(estimate: Array, sensitivity: Sequence[Array]) -> Array:
    """S Sᵀ (P, m, m), exactly symmetric; NaN in the rows and columns of absent outputs."""
    points, outputs = estimate.shape
    total = np.zeros((points, outputs, outputs))
    for columns in sensitivity:
        total += columns @ np.swapaxes(columns, -1, -2)
    total = 0.5 * (total + np.swapaxes(total, -1, -2))
    void = np.isnan(estimate)
    total[void[:, :, None] | void[:, None, :]] = np.nan
    return total


def _frozen(result: Linearised) -> Linearised:
    for name in result.__slots__:
        getattr(result, name).setflags(write=False)
    return result
