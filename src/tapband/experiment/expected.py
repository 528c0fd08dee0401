"""What a test to come is expected to read: pressure coefficients, then readings in the campaign's manner."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.contour import Contour
from tapband.experiment.inviscid import flow_round, limits_said
from tapband.experiment.rule import USABLE, refused, to_mach
from tapband.experiment.stream import solve, total_excess
from tapband.nouns.campaign import COEFFICIENT, STATIC, STREAM_CHANNELS, TOTAL, VACUUM, Campaign, Points
from tapband.nouns.errors import QuestionError
from tapband.nouns.plan import ExpectedTable, Forecast
from tapband.nouns.source import COMMON, INDEPENDENT, Source

Array = NDArray[np.float64]

RUN = "forecast"
"""Run, and value of every other grouping column, of forecast points."""


@dataclass(frozen=True, slots=True, kw_only=True)
class ExpectedCp:
    """Cp (A, n) at the forecast's Mach number, taps in table order, at angles ``alpha`` (A,) [rad].

    ``notes`` say in words where the values come from and where not to trust them.
    """

    alpha: Array
    cp: Array
    notes: tuple[str, ...]


def expected_cp(campaign: Campaign) -> ExpectedCp:
    """Expected pressure coefficients at the angles of the campaign's forecast.

    Inviscid flow is moved to the Mach number by the campaign's rule, or by that of Prandtl and Glauert where
    it has none; a table of the user's own is taken to hold at that Mach number.
    """
    forecast = _forecast(campaign)
    alpha = np.asarray(forecast.alpha, dtype=np.float64)
    if forecast.expected is not None:
        cp, notes = _from_table(forecast.expected, alpha)
        return ExpectedCp(alpha=alpha, cp=cp, notes=notes)
    rule = campaign.reduction.compressibility
    by = "prandtl-glauert" if rule == "none" else rule
    contour = Contour.of(campaign.section.x, campaign.section.y)
    flow = flow_round(contour, alpha)
    mach = np.asarray(forecast.mach)
    with np.errstate(divide="ignore", invalid="ignore"):
        cp = to_mach(flow.cp(campaign.taps.s), mach, by)
    wrong = np.any(refused(cp, mach, 0.0, by), axis=1)
    if np.any(wrong):
        angles = ", ".join(f"{a:g}" for a in np.round(np.degrees(alpha[wrong]), 6))
        raise QuestionError(
            f"forecast: inviscid pressures must lie within the range of the rule {by}; got Mach "
            f"{forecast.mach:g} at alpha {angles} deg; leave these angles out, lower mach, or give a table"
        )
    notes = (*limits_said(flow, forecast.mach), *_moved_by(by, rule, forecast.mach))
    return ExpectedCp(alpha=alpha, cp=np.asarray(cp), notes=notes)


def expected_readings(campaign: Campaign) -> Points:
    """Points F01, F02 … of the run "forecast", one an angle, as the campaign's instruments would read them.

    All are of one run (and of one group of every other column that a source refers to), so that what is set
    anew by run is common to them.

    *Assumes* the stream of the forecast: its total pressure and Mach number, isentropic.
    """
    forecast = _forecast(campaign)
    expected = expected_cp(campaign)
    size = expected.alpha.size
    names = tuple(f"F{i + 1:02d}" for i in range(size))
    groups = dict.fromkeys(_columns(campaign), (RUN,) * size)
    given = campaign.points
    stated = given is not None and given.nominal_alpha is not None
    at_mach = given is not None and given.nominal_mach is not None
    return Points(
        names=names,
        runs=(RUN,) * size,
        columns={**groups, "point": names, "run": (RUN,) * size},
        alpha=expected.alpha,
        channels={name: np.full(size, value) for name, value in _channels(campaign, forecast).items()},
        readings=_readings(campaign, forecast, expected.cp),
        t_total=None if forecast.t_total is None else np.full(size, forecast.t_total),
        nominal_alpha=expected.alpha if stated else None,
        nominal_mach=np.full(size, forecast.mach) if at_mach else None,
        counts=np.ones(size, dtype=np.int64),
    )


def reference_of(campaign: Campaign) -> str:
    """Name of the absolute column that readings are relative to; empty where there is none."""
    known = {STATIC, TOTAL, VACUUM, COEFFICIENT}
    return "" if campaign.pressures in known else campaign.pressures.removeprefix("relative to ")


def _forecast(campaign: Campaign) -> Forecast:
    if campaign.plan.forecast is None:
        raise QuestionError("forecast: needs a [forecast]; got none; add one to the campaign file")
    return campaign.plan.forecast


def _from_table(table: ExpectedTable, alpha: Array) -> tuple[Array, tuple[str, ...]]:
    """Cp (A, n) by linear interpolation in angle, and notes."""
    cp = np.stack([np.interp(alpha, table.alpha, column) for column in table.cp.T], axis=1)
    notes = ["Expected pressures are those of the campaign's own table, taken to hold at the Mach number."]
    between = np.min(np.abs(alpha[:, None] - table.alpha), axis=1) > 1e-9
    if np.any(between):
        angles = ", ".join(f"{a:g}" for a in np.round(np.degrees(alpha[between]), 6))
        notes.append(f"At alpha {angles} deg they are interpolated linearly between the angles of the table.")
    return cp, tuple(notes)


def _moved_by(by: str, rule: str, mach: float) -> tuple[str, ...]:
    said = f"Expected pressures are moved from incompressible flow to Mach {mach:g} by the rule {by}"
    said += "; the campaign chooses none." if rule == "none" else "."
    if by == "prandtl-glauert" and mach >= USABLE:
        return said, f"Prandtl-Glauert at Mach {mach:g}: usable to about {USABLE}."
    return (said,)


def _channels(campaign: Campaign, forecast: Forecast) -> dict[str, float]:
    """Stream readings in SI units, and the reference column where there is one."""
    m = forecast.mach
    static = forecast.p_total / (1.0 + float(total_excess(np.asarray(m))))
    state = {
        "p_total": forecast.p_total,
        "p_static": static,
        "p_difference": forecast.p_total - static,
        "q": 0.7 * static * m * m,
        "mach": m,
    }
    names = STREAM_CHANNELS[campaign.stream]
    reference = reference_of(campaign)
    if campaign.stream == "dynamic and mach" and (reference or campaign.pressures == VACUUM):
        names = (*names, "p_static")
    channels = {name: state[name] for name in names}
    if reference and reference not in channels:
        channels[reference] = _reference_pressure(campaign, reference, forecast)
    return channels


def _reference_pressure(campaign: Campaign, column: str, forecast: Forecast) -> float:
    """Mean of the column over the points there are, else the total pressure [Pa]."""
    if campaign.points is None or column not in campaign.points.channels:
        return forecast.p_total
    return float(np.mean(campaign.points.channels[column]))


def _readings(campaign: Campaign, forecast: Forecast, cp: Array) -> Array:
    """(A, n) in the campaign's convention [Pa], or coefficients."""
    if campaign.pressures == COEFFICIENT:
        return cp
    channels = {name: np.asarray(value) for name, value in _channels(campaign, forecast).items()}
    stream = solve(campaign.stream, campaign.pressures, channels)
    return np.asarray(cp * stream.q - stream.offset)


def _columns(campaign: Campaign) -> tuple[str, ...]:
    """Grouping columns of points that any source, declared or optional, refers to, and those there are."""
    named = {s.across_points.removeprefix("by ") for s in _sources(campaign)} - {INDEPENDENT, COMMON}
    given = set() if campaign.points is None else set(campaign.points.columns)
    return tuple(sorted((named | given) - {"point", "run"}))


def _sources(campaign: Campaign) -> Iterable[Source]:
    yield from campaign.sources
    for slot in campaign.plan.slots:
        for option in slot.options:
            yield from option.sources
