"""Results against what was planned: whether each target is met, and intervals beside the forecast ones."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.campaign import Campaign
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
    """The forecast's intervals, interpolated in angle, beside those achieved; None without a forecast.

    Both are linearised: what was planned and what was found differ by the flow, not by the method.
    """
    campaign, points = reduced.campaign, reduced.assembled.points
    forecast = campaign.plan.forecast
    if forecast is None:
        return None
    alpha, expanded, outputs = _forecast_intervals(campaign)
    order = np.argsort(alpha)
    slack = campaign.plan.polar.same_angle
    inside = (points.alpha >= alpha.min() - slack) & (points.alpha <= alpha.max() + slack)
    planned = np.full((len(points.names), len(reduced.outputs)), np.nan)
    for j, name in enumerate(reduced.outputs):
        if name in outputs:
            values = expanded[order, outputs.index(name)]
            planned[:, j] = np.where(inside, np.interp(points.alpha, alpha[order], values), np.nan)
    return Comparison(outputs=reduced.outputs, planned=planned, achieved=reduced.linear.U)


def _forecast_intervals(campaign: Campaign) -> tuple[Array, Array, tuple[str, ...]]:
    """Angles (A,) [rad], linearised U (A, m) and names of the coefficients (m)."""
    plan = outlook(campaign).campaign
    assembled = assemble(plan)
    linear = propagate(assembled.problem, campaign.intervals.level)
    return assembled.points.alpha, linear.U, assembled.problem.outputs


def why_not_compared(error: QuestionError) -> str:
    """A warning: the forecast of a reduced campaign could not be had."""
    return f"planned against achieved is left out: {error}"
