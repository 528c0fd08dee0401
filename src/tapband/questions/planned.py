"""Results against what was planned: whether each target is met, and intervals beside the forecast ones."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.errors import QuestionError
from tapband.probability.linearised import propagate
from tapband.questions.forecasting import outlook
from tapband.questions.targets import Demands, demands_of
from tapband.reduction import Reduced, assemble

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Scores:
    """The demands of the targets, the headline half-widths (D,) there, and which meet them (D,)."""

    demands: Demands
    expanded: Array
    met: NDArray[np.bool_]


def scores(reduced: Reduced) -> Scores:
    """Every target at every point that it names."""
    demands = demands_of(reduced.campaign, reduced.assembled.points, reduced.outputs)
    expanded = demands.of(reduced.headline_expanded)
    return Scores(demands=demands, expanded=expanded, met=demands.met(expanded))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Comparison:
    """Linearised expanded uncertainties (P, m): forecast, and achieved. NaN past the forecast's angles."""

    outputs: tuple[str, ...]
    planned: Array
    achieved: Array


def comparison(reduced: Reduced) -> Comparison | None:
    """The forecast's intervals at the angles read, beside those achieved; None without a forecast.

    The expected flow is taken at each point's own angle, as far as the forecast's angles reach. Both intervals
    are linearised: what was planned and what was found differ by the flow, not by the method.
    """
    campaign, points = reduced.campaign, reduced.assembled.points
    forecast = campaign.plan.forecast
    if forecast is None:
        return None
    slack = campaign.plan.polar.same_angle
    low, high = min(forecast.alpha), max(forecast.alpha)
    inside = np.flatnonzero((points.alpha >= low - slack) & (points.alpha <= high + slack))
    planned = np.full((len(points.names), len(reduced.outputs)), np.nan)
    if inside.size:
        alpha, place = np.unique(np.clip(points.alpha[inside], low, high), return_inverse=True)
        ahead = replace(forecast, alpha=tuple(alpha.tolist()))
        at = replace(campaign, plan=replace(campaign.plan, forecast=ahead))
        assembled = assemble(outlook(at).campaign)
        planned[inside] = propagate(assembled.problem, campaign.intervals.level).U[place.ravel()]
    return Comparison(outputs=reduced.outputs, planned=planned, achieved=reduced.linear.U)


def why_not_compared(error: QuestionError) -> str:
    """A warning: the forecast of a reduced campaign could not be had."""
    return f"planned against achieved is left out: {error}"
