"""Headline intervals of a planned campaign, by both propagators, at the points that targets name."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.campaign import Campaign, Points, Rows
from tapband.questions.targets import Demands
from tapband.reduction import reduce_campaign

Array = NDArray[np.float64]


FAR = 3.0
"""Times a declared size past which :func:`confirm_far` looks: an adaptive run may take minutes there."""
FEW, MORE, STEADY = "1000", "5000", 1e-3
"""Trials of a first and a second look, and the numerical standard deviation of U, relative, that needs no second."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Confirmed:
    """Expanded uncertainties at each demand (D,): the headline one and the linearised one.

    ``tolerance`` (D,) is what the headline one may still move by: twice the numerical standard deviation of
    the half-width where Monte Carlo gives it, else zero.
    """

    headline: Array
    linear: Array
    tolerance: Array

    @property
    def factor(self) -> Array:
        """(D,) headline over linearised."""
        return np.divide(self.headline, self.linear, out=np.ones_like(self.headline), where=self.linear > 0.0)


def confirm(campaign: Campaign, demands: Demands, trials: str | None = None) -> Confirmed:
    """Both intervals at each of the demands on the campaign's points."""
    assert campaign.points is not None
    used, place = np.unique(demands.point, return_inverse=True)
    part = replace(campaign, points=at_points(campaign.points, used))
    reduced = reduce_campaign(part, trials=trials)
    here = (place.ravel(), demands.output)
    drawn = reduced.montecarlo
    spread = np.hypot(drawn.low_sd, drawn.high_sd)
    return Confirmed(
        headline=reduced.headline_expanded[here],
        linear=reduced.linear.U[here],
        tolerance=np.where(reduced.agrees, 0.0, spread)[here],
    )


def confirm_far(campaign: Campaign, demands: Demands, trials: str | None = None) -> Confirmed:
    """As :func:`confirm` for sizes far from any declared one: a fixed number of trials, more where they scatter.

    The ends are then good to about 0.3 % of U at worst; ``trials`` overrules both numbers.
    """
    if trials is not None:
        return confirm(campaign, demands, trials)
    first = confirm(campaign, demands, FEW)
    known = np.isfinite(first.headline)
    steady = np.all(first.tolerance[known] <= STEADY * first.headline[known])
    return first if steady else confirm(campaign, demands, MORE)


def at_points(points: Points, index: NDArray[np.int64]) -> Points:
    """Some of the points, in the order of ``index``, with their samples."""
    pick = index.tolist()

    def some(values: tuple[str, ...]) -> tuple[str, ...]:
        return tuple(values[i] for i in pick)

    blocks = points.blocks

    def rows() -> Iterator[Rows]:
        assert blocks is not None
        new = np.full(len(points.names), -1, dtype=np.int64)
        new[index] = np.arange(index.size)
        for block in blocks():
            keep = new[block.point] >= 0
            yield Rows(
                point=new[block.point[keep]],
                alpha=block.alpha[keep],
                channels={name: value[keep] for name, value in block.channels.items()},
                readings=block.readings[keep],
            )

    return replace(
        points,
        names=some(points.names),
        runs=some(points.runs),
        columns={name: some(values) for name, values in points.columns.items()},
        alpha=points.alpha[index],
        channels={name: value[index] for name, value in points.channels.items()},
        readings=points.readings[index],
        t_total=None if points.t_total is None else points.t_total[index],
        nominal_alpha=None if points.nominal_alpha is None else points.nominal_alpha[index],
        nominal_mach=None if points.nominal_mach is None else points.nominal_mach[index],
        counts=points.counts[index],
        blocks=None if blocks is None else rows,
    )
