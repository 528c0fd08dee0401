"""The campaign planned for with other taps, and the intervals that these would give."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from tapband.experiment.expected import expected_cp, expected_readings
from tapband.nouns.campaign import Campaign
from tapband.nouns.plan import ExpectedTable
from tapband.probability.linearised import propagate
from tapband.questions.basis import Basis
from tapband.questions.targets import demands_of
from tapband.reduction import assemble

Array = NDArray[np.float64]


def tap_names(s: Array, fixed: Sequence[tuple[str, float]]) -> tuple[str, ...]:
    """Names of taps at rising arc lengths s (n,): those of ``fixed`` taps (name, s) where they are; else U and L
    numbered from the nose."""
    taken = {name for name, _ in fixed}
    names = [""] * s.size
    for name, place in fixed:
        names[int(np.argmin(np.abs(s - place)))] = name
    for letter, order in (("U", np.flatnonzero(s >= 0.0)), ("L", np.flatnonzero(s < 0.0)[::-1])):
        number = 0
        for i in order.tolist():
            while not names[i]:
                number += 1
                new = f"{letter}{number:02d}"
                names[i] = "" if new in taken else new
    return tuple(names)


def expected_at(basis: Basis, s: Array) -> Array:
    """Expected Cp (A, n) at arc lengths s (n,) [chords], any order; A the angles of the forecast, as stated.

    A table of expected pressures is splined along the contour between its taps.
    """
    forecast = basis.campaign.plan.forecast
    assert forecast is not None
    if forecast.expected is None:
        taps = replace(basis.campaign.taps, s=s)
        return expected_cp(replace(basis.campaign, taps=taps)).cp
    live = np.flatnonzero(basis.assembled.nominal.live.any(axis=0))
    order = live[np.argsort(basis.assembled.s[live], kind="stable")]
    place = basis.assembled.s[order]
    known = expected_cp(basis.campaign).cp[:, order]
    return np.asarray(CubicSpline(place, known, axis=1)(np.clip(s, place[0], place[-1])))


def with_taps(basis: Basis, s: Array, names: Sequence[str], cp: Array) -> Campaign:
    """The campaign planned for with taps at rising arc lengths s (n,) [chords] that are to read Cp (A, n).

    A new tap takes the full scale and the groups of the tap nearest to it along the contour, but for modules,
    which it takes in turn.
    """
    campaign, contour = basis.campaign, basis.assembled.contour
    live = np.flatnonzero(basis.assembled.nominal.live.any(axis=0))
    nearest = live[np.argmin(np.abs(s[:, None] - basis.assembled.s[live]), axis=1)].tolist()
    columns = {
        name: _in_turn(values, live.tolist(), s.size)
        if name == "module"
        else tuple(values[i] for i in nearest)
        for name, values in campaign.taps.columns.items()
    }
    x, y = contour.point(s)
    taps = replace(
        campaign.taps, names=tuple(names), s=s, x=x, y=y, upper=s >= 0.0,
        excluded=np.zeros(s.size, dtype=np.bool_), full_scale=campaign.taps.full_scale[nearest], columns=columns,
    )  # fmt: skip
    forecast = campaign.plan.forecast
    assert forecast is not None
    order = np.argsort(forecast.alpha)
    table = ExpectedTable(alpha=np.array(forecast.alpha)[order], cp=cp[order])
    plan = replace(campaign.plan, forecast=replace(forecast, expected=table))
    campaign = replace(campaign, taps=taps, plan=plan)
    return replace(campaign, points=expected_readings(campaign))


def _in_turn(values: Sequence[str], live: Sequence[int], count: int) -> tuple[str, ...]:
    groups = sorted({values[i] for i in live if values[i]}) or [""]
    return tuple(groups[i % len(groups)] for i in range(count))


def worst_interval(basis: Basis, s: Array, cp: Array) -> float:
    """The largest ratio of linearised interval to target with taps at rising arc lengths s (n,) reading Cp (A, n)."""
    campaign = with_taps(basis, s, [f"tap {i + 1}" for i in range(s.size)], cp)
    points = campaign.points
    assert points is not None
    problem = assemble(campaign).problem
    demands = demands_of(campaign, points, problem.outputs)
    ratio = demands.of(propagate(problem, basis.level).U) / demands.limit
    return float(np.max(ratio))
