"""Where linear shares and Sobol' indices part, and why: products of errors, curvature, heavy tails."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Problem
from tapband.probability.jansen import linear_variance
from tapband.probability.sensitivity import Indices

Array = NDArray[np.float64]
WORTH = 0.005
"""Differences below this part of the variance are not worth a word, however well they are known."""


def differs(share: Array, indices: Indices) -> NDArray[np.bool_]:
    """(P, m, G) whether an index is off the linear share by more than its interval, and by ``WORTH``."""
    with np.errstate(invalid="ignore"):
        first = np.abs(indices.first - share) > np.maximum(indices.first_ci, WORTH)
        total = np.abs(indices.total - share) > np.maximum(indices.total_ci, WORTH)
    return np.asarray(first | total)


def reasons(
    share: Array, indices: Indices, problem: Problem, owner: NDArray[np.int64]
) -> NDArray[np.object_]:
    """(P, m, G) texts, empty where there is nothing to say."""
    note = np.full(share.shape, "", dtype=object)
    true = _true_shares(problem, owner, share.shape)
    known = np.isfinite(share).all(axis=2)
    note[known & np.isnan(true).any(axis=2)] = (
        "no indices: with 2 degrees of freedom or less a variance does not exist"
    )
    for p, j in np.argwhere(known & (indices.failed > 0)):
        note[p, j] = f"no indices: {indices.failed[p, j]} evaluations had no valid state"
    for p, j, g in np.argwhere(differs(share, indices)):
        note[p, j, g] = _reason(
            float(share[p, j, g]), float(true[p, j, g]), float(indices.first[p, j, g]),
            float(indices.first_ci[p, j, g]), float(indices.total[p, j, g]), float(indices.total_ci[p, j, g]),
        )  # fmt: skip
    return note


def _true_shares(problem: Problem, owner: NDArray[np.int64], shape: tuple[int, ...]) -> Array:
    """Linear shares (P, m, G) with the variances that t distributions and doubted limits really have."""
    by_source = linear_variance(problem.families, problem.sensitivity, problem.estimate.shape)
    by_group = np.zeros(shape)
    for s, g in enumerate(owner.tolist()):
        by_group[..., g] += by_source[..., s]
    whole = by_group.sum(axis=2, keepdims=True)
    return np.asarray(np.divide(by_group, whole, out=np.zeros_like(by_group), where=~(whole <= 0.0)))


def _reason(share: float, true: float, first: float, first_ci: float, total: float, total_ci: float) -> str:
    parts = []
    if abs(true - share) > WORTH:
        parts.append(f"few degrees of freedom or a doubted size: true variances give {true:.3f}")
    if abs(first - true) > max(first_ci, WORTH):
        more = "curvature, or products within the group" if first > true else "others' curvature and products"
        parts.append(f"{more} ({first - true:+.3f} alone)")
    if total - first > max(first_ci + total_ci, WORTH):
        parts.append(f"products with other groups ({total - first:+.3f})")
    why = "; ".join(parts) or "several small effects"
    return f"total {total:.3f} ± {total_ci:.3f} against a linear share of {share:.3f}: {why}"
