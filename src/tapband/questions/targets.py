"""Which points a campaign's targets bind, and whether results meet them.

D demands: one a target and a point that it names. A target is held against the headline interval.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.campaign import Campaign, Points
from tapband.nouns.errors import QuestionError
from tapband.nouns.plan import Target

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

SAME_ANGLE = 1e-9
"""[rad] Slack of an angle, for rounding."""
ROUNDING = 1e-9
"""Relative excess over a target that is rounding."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Demands:
    """Target (D,), point (D,) and coefficient (D,) indices, and the largest expanded uncertainty wanted (D,)."""

    target: Indices
    point: Indices
    output: Indices
    limit: Array

    def of(self, values: Array) -> Array:
        """(D, …) from values (P, m, …)."""
        return np.asarray(values[self.point, self.output])

    def met(self, expanded: Array) -> NDArray[np.bool_]:
        """(D,) whether expanded uncertainties (D,) meet their targets; one that does not exist meets nothing."""
        return np.asarray(expanded <= self.limit * (1.0 + ROUNDING))


def demands_of(campaign: Campaign, points: Points, outputs: Sequence[str]) -> Demands:
    """The demands of the campaign's targets on ``points``.

    A target that names points of the readings holds, in a forecast, at the angles of those points.
    """
    rows: list[tuple[int, int, int, float]] = []
    for t, target in enumerate(campaign.plan.targets):
        if target.coefficient in outputs:
            output = outputs.index(target.coefficient)
            rows += [(t, int(p), output, target.expanded) for p in points_of(target, campaign, points)]
    table = np.array(rows, dtype=np.float64).reshape(-1, 4)
    whole = table[:, :3].astype(np.int64)
    return Demands(target=whole[:, 0], point=whole[:, 1], output=whole[:, 2], limit=table[:, 3])


def points_of(target: Target, campaign: Campaign, points: Points) -> Indices:
    """Indices of the points that a target names."""
    if target.points is not None:
        named = np.array(
            [
                key in target.points or name in target.points
                for key, name in zip(points.keys, points.names, strict=True)
            ],
            dtype=np.bool_,
        )
        if not np.any(named) and campaign.points is not None:
            named = _at_angles_of(target.points, campaign, points)
        return np.flatnonzero(named)
    if target.alpha_range is None:
        return np.arange(len(points.names))
    low, high = target.alpha_range
    slack = (
        campaign.plan.polar.same_angle + SAME_ANGLE
    )  # a point set at an end may have been corrected past it
    return np.flatnonzero((points.alpha >= low - slack) & (points.alpha <= high + slack))


def _at_angles_of(names: Sequence[str], campaign: Campaign, points: Points) -> NDArray[np.bool_]:
    given = campaign.points
    assert given is not None
    pairs = zip(given.keys, given.names, given.alpha.tolist(), strict=True)
    angles = np.array([alpha for key, name, alpha in pairs if key in names or name in names])
    if not angles.size:
        return np.zeros(points.alpha.size, dtype=np.bool_)
    apart = np.min(np.abs(points.alpha[:, None] - angles), axis=1)
    return np.asarray(apart <= campaign.plan.polar.same_angle + SAME_ANGLE)


def require_targets(campaign: Campaign, points: Points, demands: Demands) -> None:
    """Refuse a plan that asks nothing, or asks it where there is no point."""
    targets = campaign.plan.targets
    if not targets:
        raise QuestionError(
            'size: needs at least one [[target]]; got none; add one, such as coefficient = "cl", expanded = 0.005'
        )
    for t, target in enumerate(targets):
        if not np.any(demands.target == t):
            low, high = np.degrees([points.alpha.min(), points.alpha.max()])
            raise QuestionError(
                f"target[{t + 1}]: must hold at some point planned for; got none of {len(points.names)} points, at "
                f"{low:g} to {high:g} deg, for {target.coefficient}; widen alpha_range or extend [forecast] alpha"
            )
