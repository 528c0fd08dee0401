"""Which of many sources may be left out of a campaign, and what the intervals lose by it.

Sources are put in order by Morris's screening, which sees curvature and products where the linear shares are
blind; then the least of them are left out together for as long as no interval becomes shorter by more than
``LOSS``. S sources, m coefficients, at one point.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Problem
from tapband.probability.by_salib import Screening, screen
from tapband.probability.distributions import effective_dof
from tapband.probability.linearised import Linearised
from tapband.questions.rank import expanded

Array = NDArray[np.float64]

MANY = 30
"""More declared sources than this are screened."""
LOSS = 0.01
"""Largest relative loss of any coefficient's interval that leaving sources out may make."""
TRAJECTORIES = 40


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Screened:
    """Sources at one point; arrays (m, S) unless stated, NaN for coefficients that cannot be screened."""

    sources: tuple[str, ...]
    mu_star: Array
    """Mean absolute elementary effect, in the coefficient, of moving the source across its range."""
    mu_star_ci: Array
    loss: Array
    """Part of U lost when the source and all less important ones are left out."""
    place: NDArray[np.int64]
    """(S,) 1 for the most important."""
    leave_out: NDArray[np.bool_]
    """(S,)."""


def screen_sources(problem: Problem, linear: Linearised, level: float, seed: int) -> Screened:
    """The sources of a problem of one point.

    A source is as important as its largest part in any coefficient, μ* over the root sum of squares of all.
    """
    found = screen(problem, 0, TRAJECTORIES, seed)
    order = np.argsort(_importance(found), kind="stable")
    variance = linear.contribution[0] ** 2
    nu = np.stack([effective_dof(family)[0] for family in problem.families])
    whole = expanded(variance, nu, level)
    loss = np.full(variance.shape, np.nan)
    left = variance.copy()
    for source in order:
        left[:, source] = 0.0
        rest = expanded(left, nu, level)
        loss[:, source] = np.divide(whole - rest, whole, out=np.zeros_like(whole), where=whole > 0.0)
    least = np.nan_to_num(loss[:, order]).max(axis=0) <= LOSS
    small = _importance(found)[order] <= np.sqrt(2.0 * LOSS)
    count = int(np.argmin(np.append(least & small, False)))
    place = np.empty(order.size, dtype=np.int64)
    place[order] = np.arange(order.size, 0, -1)
    return Screened(
        sources=tuple(family.source for family in problem.families),
        mu_star=found.mu_star,
        mu_star_ci=found.mu_star_ci,
        loss=loss,
        place=place,
        leave_out=np.isin(np.arange(order.size), order[:count]),
    )


def _importance(found: Screening) -> Array:
    """(S,) largest part of a source in any coefficient."""
    known = found.mu_star[np.isfinite(found.mu_star).all(axis=1)]
    whole = np.sqrt(np.sum(known**2, axis=1, keepdims=True))
    part = np.divide(known, whole, out=np.zeros_like(known), where=whole > 0.0)
    return np.asarray(part.max(axis=0, initial=0.0))
