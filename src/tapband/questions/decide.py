"""Decisions about measured values: probability of conformity, guard band, and one of three answers.

A value inside the limits by more than the guard band meets them, one outside by more than it fails, any other
is undecided. A guard of zero accepts or rejects the value as it is.

*Source* JCGM 106:2012, 7.3 (probability of conformity), 8.2 (simple acceptance), 8.3 (guard bands).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.plan import Limit
from tapband.probability.montecarlo import sample
from tapband.questions.bent import bent, moments
from tapband.questions.combine import Combination
from tapband.questions.latents import Latents
from tapband.questions.law import law_of
from tapband.reduction import Reduced

Array = NDArray[np.float64]
Answer = Literal["meets", "fails", "undecided"]
FAR = 1.0 - 1e-6
"""Level as far out as whose ends the law is resolved."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Decision:
    """One point against one limit."""

    point: int
    coefficient: str
    value: float
    expanded: float
    lower: float
    upper: float
    probability: float
    """That the true value lies within the limits."""
    rule: str
    answer: Answer


def decisions(reduced: Reduced, latents: Latents) -> tuple[list[Decision], list[str]]:
    """Every limit of the campaign at every point it names, and what to warn of."""
    asked: list[tuple[Limit, int, int]] = []
    said: list[str] = []
    for number, limit in enumerate(reduced.campaign.plan.limits, 1):
        if limit.coefficient not in reduced.outputs:
            said.append(f"limit[{number}]: {limit.coefficient} is not computed here; nothing was decided")
            continue
        j = reduced.outputs.index(limit.coefficient)
        points = named(limit, latents, reduced.campaign.plan.polar.same_angle)
        if not points.size:
            said.append(f"limit[{number}] on {limit.coefficient}: no point in its range; nothing was decided")
        known = np.isfinite(reduced.linear.estimate[points, j])
        asked += [(limit, p, j) for p in points[known].tolist()]
    chances = _probabilities(reduced, latents, asked)
    found = [_decision(reduced, *one, chance) for one, chance in zip(asked, chances, strict=True)]
    return found, said


def named(limit: Limit, latents: Latents, same_angle: float) -> NDArray[np.int64]:
    """Points that a limit is about; its range of angles reaches as far as counts as one angle."""
    if limit.points is not None:
        pairs = zip(latents.keys, latents.names, strict=True)
        return np.flatnonzero([key in limit.points or name in limit.points for key, name in pairs])
    if limit.alpha_range is None:
        return np.arange(len(latents.keys))
    low, high = limit.alpha_range
    inside = (latents.alpha >= low - same_angle) & (latents.alpha <= high + same_angle)
    return np.flatnonzero(inside)


def _decision(reduced: Reduced, limit: Limit, point: int, j: int, probability: float) -> Decision:
    value = float(reduced.linear.estimate[point, j])
    expanded = float(reduced.headline_expanded[point, j])
    return Decision(
        point=point,
        coefficient=limit.coefficient,
        value=value,
        expanded=expanded,
        lower=limit.lower,
        upper=limit.upper,
        probability=probability,
        rule=rule_of(limit.guard),
        answer=answer(value, expanded * limit.guard, limit.lower, limit.upper),
    )


def rule_of(guard: float) -> str:
    """The decision rule in words."""
    if guard == 0.0:
        return "simple acceptance (JCGM 106, 8.2)"
    return f"guarded acceptance and rejection, w = {guard:g} U (JCGM 106, 8.3)"


def answer(value: float, guard: float, lower: float, upper: float) -> Answer:
    """The answer for a value, with a guard band of this width on either side of each limit."""
    if lower + guard <= value <= upper - guard:
        return "meets"
    if value < lower - guard or value > upper + guard:
        return "fails"
    return "undecided"


def _probabilities(
    reduced: Reduced, latents: Latents, asked: Sequence[tuple[Limit, int, int]]
) -> list[float]:
    """That each quantity lies within its limits.

    By the exact law of the linear model, with the mean and spread that Monte Carlo found; by counting trials
    where the equation is far from linear.
    """
    if not asked:
        return []
    points, outputs = (np.array([one[i] for one in asked]) for i in (1, 2))
    weight = np.zeros((len(asked), 1, len(latents.outputs)))
    weight[np.arange(len(asked)), 0, outputs] = 1.0
    combination = Combination(
        rows=len(asked),
        row=np.arange(len(asked)),
        point=points,
        weight=weight,
        on_alpha=np.zeros((len(asked), 1)),
    )
    u = reduced.linear.u[points, outputs]
    families = reduced.assembled.problem.families
    law = law_of(families, latents, combination, u[:, None], np.zeros((len(asked), 1)), FAR)
    shift, ratio = (part[points, outputs] for part in moments(reduced))
    value = reduced.linear.estimate[points, outputs] + shift
    ends = np.array([[limit.lower, limit.upper] for limit, _, _ in asked])
    unit = np.where(u > 0.0, u * ratio, 1.0)
    below, above = (law.at((ends[:, i] - value) / unit)[0] for i in (0, 1))
    exact = (ends[:, 0] <= value) & (value <= ends[:, 1])
    chance = np.where(u > 0.0, np.clip(above - below, 0.0, 1.0), exact)
    for row in np.flatnonzero(bent(reduced)[points, outputs]).tolist():
        chance[row] = _counted(reduced, *asked[row])
    return [float(value) for value in chance]


def _counted(reduced: Reduced, limit: Limit, point: int, j: int) -> float:
    """The share of trials of the equation that lie within the limits; refused ones lie outside."""
    seed = reduced.campaign.intervals.seed
    y = sample(reduced.assembled.problem, slice(point, point + 1), seed, 0)[0, :, j]
    return float(np.mean((y >= limit.lower) & (y <= limit.upper)))
