"""Targets, limits, forecast, layout and wiring: what a campaign asks beyond its coefficients."""

from __future__ import annotations

import re
from collections.abc import Sequence
from contextlib import suppress
from functools import partial
from math import inf, nan, pi, radians

import numpy as np

from tapband.files.expected import read_expected
from tapband.files.faults import RuleError, nearest, offer, shown
from tapband.files.model_plan import ForecastPart, LayoutPart, LimitPart, PolarPart, TargetPart, WiringPart
from tapband.files.setting import Setting
from tapband.files.tables import BrokenTableError
from tapband.files.units import ANGLE, PRESSURE, TEMPERATURE, TIME, bare, chords, fraction, quantity, split
from tapband.nouns.plan import Forecast, Layout, Limit, Polar, Target, Wiring

Range = tuple[float, float]


def read_polar(part: PolarPart, setting: Setting) -> Polar:
    """How polars are read."""
    same = _above_zero(part.same_angle, ANGLE, "polar.same_angle", setting)
    return Polar(
        linear_range=_range(part.linear_range, "polar.linear_range", setting, apart=True),
        same_angle=same if same is not None else radians(0.1),
    )


def read_limit(part: LimitPart, place: str, setting: Setting) -> Limit:
    """A decision."""
    findings, where = setting.folder.findings, setting.folder.at(place)
    if part.lower is None and part.upper is None:
        findings.add(where, "needs lower or upper, or both", "nothing", "write for example upper = 0.0")
    lower = -inf if part.lower is None else part.lower
    upper = inf if part.upper is None else part.upper
    if lower >= upper:
        got = f"lower = {bare(lower)}, upper = {bare(upper)}"
        findings.add(f"{where}.lower", "must be below upper", got, "swap or correct them")
    angles, points = _where(part, place, setting)
    return Limit(
        coefficient=part.coefficient,
        lower=lower,
        upper=upper,
        guard=part.guard,
        alpha_range=angles,
        points=points,
    )


def read_target(part: TargetPart, place: str, setting: Setting) -> Target:
    """A target."""
    angles, points = _where(part, place, setting)
    return Target(coefficient=part.coefficient, expanded=part.expanded, alpha_range=angles, points=points)


def _where(
    part: LimitPart | TargetPart, place: str, setting: Setting
) -> tuple[Range | None, tuple[str, ...] | None]:
    """The angles or the points something holds at."""
    findings, where = setting.folder.findings, setting.folder.at(place)
    if part.alpha_range is not None and part.points is not None:
        findings.add(where, "must hold at angles or at points", "alpha_range and points", "keep one")
    angles = _range(part.alpha_range, f"{place}.alpha_range", setting)
    if part.points is None:
        return angles, None
    if not part.points:
        findings.add(f"{where}.points", "must name at least one point", "[]", "name a point or remove points")
    _check_points(part.points, f"{place}.points", setting)
    return angles, tuple(part.points)


def check_reach(
    ranges: Sequence[tuple[str, Range | None]], forecast: Forecast | None, setting: Setting
) -> None:
    """Each range of angles (with its place) holds at some point or some forecast angle."""
    known = [] if setting.points is None else [setting.points.alpha]
    known += [] if forecast is None else [np.array(forecast.alpha)]
    angles = np.concatenate(known or [np.empty(0)])
    if not angles.size:
        return
    slack = radians(0.05)
    for place, ends in ranges:
        if ends is None or not ends[0] <= ends[1]:
            continue
        if not np.any((angles >= ends[0] - slack) & (angles <= ends[1] + slack)):
            got = f"angles from {np.degrees(angles.min()):.4g} to {np.degrees(angles.max()):.4g} deg"
            setting.folder.findings.add(
                setting.folder.at(place), "must hold at some point", got, "widen the range"
            )


def _check_points(names: Sequence[str], place: str, setting: Setting) -> None:
    """Points exist; where a name is used in several runs it says which."""
    findings, points = setting.folder.findings, setting.points
    if points is None:
        if names and setting.forecast:
            findings.add(
                setting.folder.at(place),
                "needs a points table",
                shown(list(names)),
                "write alpha_range instead",
            )
        return
    keys = [f"{run}/{name}" if run else name for run, name in zip(points.runs, points.names, strict=True)]
    for i, name in enumerate(names):
        where = setting.folder.at(f"{place}[{i + 1}]")
        same = [key for key, point in zip(keys, points.names, strict=True) if point == name]
        if name in keys or len(same) == 1:
            continue
        if same:
            findings.add(where, "must say of which run", shown(name), offer(name, same))
        else:
            near = nearest(name, [*points.names, *keys])
            do = f"write {shown(near)}" if near else "write the name of a point"
            findings.add(where, f"must be a point of {points.table.file}", shown(name), do)


def _range(
    value: Sequence[object] | None, place: str, setting: Setting, *, apart: bool = False
) -> Range | None:
    """A range of angles [rad]; ``apart``: its ends must differ."""
    if value is None:
        return None
    findings = setting.folder.findings
    ends = [
        findings.take(setting.folder.at(f"{place}[{i + 1}]"), partial(quantity, end, ANGLE), nan)
        for i, end in enumerate(value)
    ]
    low, high = ends
    if low > high or (apart and low == high):
        findings.add(
            setting.folder.at(place),
            "must run from a smaller angle to a larger one",
            shown(list(value)),
            "swap or correct them",
        )
    return low, high


def _above_zero(value: object | None, dimension: str, place: str, setting: Setting) -> float | None:
    """A quantity above zero in SI units; None where it is not stated or refused."""
    if value is None:
        return None
    found = setting.folder.findings.take(setting.folder.at(place), lambda: quantity(value, dimension), None)
    if found is not None and found <= 0.0:
        setting.folder.findings.add(
            setting.folder.at(place), "must be above zero", shown(value), "correct it"
        )
        return None
    return found


def read_forecast(part: ForecastPart, setting: Setting) -> Forecast | None:
    """A test to come, None with its faults noted."""
    findings, at = setting.folder.findings, setting.folder.at
    before = len(findings)
    alpha = [
        findings.take(at(f"forecast.alpha[{i + 1}]"), partial(quantity, v, ANGLE), nan)
        for i, v in enumerate(part.alpha)
    ]
    for i, angle in enumerate(alpha):
        where = at(f"forecast.alpha[{i + 1}]")
        if abs(angle) > pi:
            findings.add(
                where, "must lie within ±180 deg", shown(part.alpha[i]), "correct the angle or its unit"
            )
        elif angle in alpha[:i]:
            findings.add(
                where, "must be an angle of its own", shown(part.alpha[i]), "remove the repeated angle"
            )
    margin = findings.take(at("forecast.margin"), lambda: fraction(part.margin), 0.0)
    if margin < 0.0:
        findings.add(
            at("forecast.margin"), "must not be negative", shown(part.margin), 'write for example "20 %"'
        )
    expected = None
    if part.pressures != "inviscid":
        with suppress(BrokenTableError):
            expected = read_expected(part.pressures, alpha, setting)
    p_total = _above_zero(part.p_total, PRESSURE, "forecast.p_total", setting)
    found = Forecast(
        alpha=tuple(alpha), p_total=nan if p_total is None else p_total,
        t_total=_above_zero(part.t_total, TEMPERATURE, "forecast.t_total", setting), mach=part.mach,
        expected=expected, margin=margin, fluctuation=_fluctuation(part.fluctuation, setting),
        time_scale=_above_zero(part.time_scale, TIME, "forecast.time_scale", setting),
        record=_above_zero(part.record, TIME, "forecast.record", setting),
    )  # fmt: skip
    return found if len(findings) == before else None


def _fluctuation(text: str | None, setting: Setting) -> float | None:
    """A fluctuation as a fraction of the dynamic pressure."""
    if text is None:
        return None

    def read() -> float:
        number, name = split(text)
        if not re.fullmatch(r"%\s*of\s+(the\s+)?dynamic\s+pressure", name):
            raise RuleError(
                "must be per cent of dynamic pressure",
                shown(text),
                f'write "{bare(number)} % of dynamic pressure"',
            )
        if number < 0.0:
            raise RuleError("must not be negative", shown(text), "write it without the sign")
        return number / 100.0

    return setting.folder.findings.take(setting.folder.at("forecast.fluctuation"), read, None)


def read_layout(part: LayoutPart, setting: Setting) -> Layout:
    """A tap layout to be found."""
    findings, at = setting.folder.findings, setting.folder.at
    value = part.smallest_spacing
    spacing = findings.take(at("layout.smallest_spacing"), lambda: chords(value, setting.chord), 0.0)
    if spacing < 0.0:
        findings.add(
            at("layout.smallest_spacing"), "must not be negative", shown(value), 'write for example "2 mm"'
        )
    if spacing * part.taps > 2.0 * part.rearmost:
        findings.add(
            at("layout.smallest_spacing"), f"must leave room for {part.taps} taps on both surfaces",
            shown(value), "write a smaller spacing or fewer taps",
        )  # fmt: skip
    if len(part.fixed) > part.taps:
        findings.add(
            at("layout.fixed"),
            f"must not be more than the {part.taps} taps",
            str(len(part.fixed)),
            "name fewer",
        )
    names = setting.taps.names if setting.taps else None
    for i, name in enumerate(part.fixed):
        if names is not None and name not in names:
            findings.add(
                at(f"layout.fixed[{i + 1}]"),
                "must be a tap of the tap table",
                shown(name),
                offer(name, names),
            )
    return Layout(taps=part.taps, smallest_spacing=spacing, rearmost=part.rearmost, fixed=tuple(part.fixed))


def read_wiring(part: WiringPart, setting: Setting) -> Wiring:
    """Modules to wire to."""
    taps = setting.taps
    live = int(np.count_nonzero(~taps.excluded)) if taps else 0
    if part.modules * part.ports < live:
        setting.folder.findings.add(
            setting.folder.at("wiring.ports"), f"must give a port to each of {live} taps",
            f"{part.modules} x {part.ports} ports", "write more modules or ports",
        )  # fmt: skip
    return Wiring(modules=part.modules, ports=part.ports)
