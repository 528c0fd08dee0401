"""Reads a campaign: the file, its tables, its sources and its plans, all faults in one pass.

Use :func:`load`. The other modules of reading each turn one part of the file into its nouns and note what
is wrong with it in a :class:`~tapband.files.faults.Findings`.
"""

from __future__ import annotations

import os
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path

from tapband.files.acts import Arrangement
from tapband.files.campaign_text import CampaignText, read_campaign_text
from tapband.files.cautions import warn_of_reduction, warn_of_sources
from tapband.files.channels import read_channels
from tapband.files.contours import read_chord, read_section
from tapband.files.faults import Findings, nearest, shown
from tapband.files.folder import Folder
from tapband.files.model import ClosurePart, IntervalsPart, ReductionPart, SourcePart
from tapband.files.parts import Parts, read_parts
from tapband.files.planning import (
    check_reach,
    read_forecast,
    read_layout,
    read_limit,
    read_polar,
    read_target,
    read_wiring,
)
from tapband.files.points import PointList, read_points
from tapband.files.setting import Place, Setting
from tapband.files.slots import read_slots
from tapband.files.sources import read_source
from tapband.files.tables import BrokenTableError
from tapband.files.taps import TapList, read_taps
from tapband.nouns.campaign import (
    COEFFICIENT,
    STATIC,
    TOTAL,
    VACUUM,
    Campaign,
    Closure,
    Intervals,
    Reduction,
    Section,
    Taps,
)  # fmt: skip
from tapband.nouns.errors import QuestionError
from tapband.nouns.monte_carlo import trials_fault, trials_text
from tapband.nouns.plan import Plan
from tapband.nouns.source import Source


def load(path: str | os.PathLike[str]) -> Campaign:
    """The campaign that a file describes, everything resolved to SI units and checked.

    Raises :class:`~tapband.nouns.errors.InputError` with every fault of the file and its tables.
    """
    if not isinstance(path, (str, os.PathLike)):
        rule = "load: takes the path of a campaign file"
        raise QuestionError(f'{rule}; got {type(path).__name__}; write tapband.load("campaign.toml")')
    findings = Findings()
    where = Path(path)
    text = read_campaign_text(where, findings)
    if text is None:
        findings.raise_if_any()
        raise AssertionError("a file that cannot be read is a fault")
    return _resolve(text, Folder(where.parent, text.file, findings), findings)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Tables:
    """What the tables hold; None where one cannot be used."""

    section: Section | None
    tap_list: TapList | None
    taps: Taps | None
    points: PointList | None


def _resolve(text: CampaignText, folder: Folder, findings: Findings) -> Campaign:
    parts = read_parts(text, findings)
    chord = read_chord(parts.section, folder)
    arrangement = _arrangement(parts, folder)
    tables = _read_tables(parts, chord, arrangement, folder)
    known = arrangement or Arrangement(pressures=VACUUM, stream="total and static")
    channels = (
        read_channels(parts.stream, known, tables.tap_list, folder) if parts.stream and arrangement else {}
    )
    setting = Setting(
        folder=folder, arrangement=known, chord=chord, taps=tables.tap_list, points=tables.points,
        forecast=parts.has_forecast, channels=channels,
    )  # fmt: skip
    sources = _sources(parts, text, setting) if arrangement else ()
    reduction, intervals = _reduction(parts.reduction), _intervals(parts.intervals, folder)
    plan = _plan(parts, text, setting) if arrangement else Plan()
    findings.raise_if_any()
    assert tables.section is not None
    assert tables.taps is not None
    assert arrangement is not None
    points = tables.points.points if tables.points else None
    warn_of_sources(sources, tables.section, tables.taps, points, channels, arrangement, findings)
    warn_of_reduction(reduction, sources, findings)
    return Campaign(
        name=Path(text.file).stem, title=parts.title, folder=str(folder.path), section=tables.section,
        taps=tables.taps, pressures=arrangement.pressures, stream=arrangement.stream, points=points,
        channels=channels, reduction=reduction, intervals=intervals, sources=sources, plan=plan,
        warnings=findings.warnings, inputs=folder.hashes(), declared=text.text,
    )  # fmt: skip


def _arrangement(parts: Parts, folder: Folder) -> Arrangement | None:
    """What the readings are relative to and where the stream comes from, None with its fault noted."""
    if parts.readings is None or parts.stream is None:
        return None
    stated, stream = parts.readings.pressures, parts.stream.source
    fixed = (STATIC, TOTAL, VACUUM, COEFFICIENT)
    column = stated.removeprefix("relative to ").strip()
    where = folder.at("readings.pressures")
    if stated not in fixed and (column == stated.strip() or not column):
        do = f'write {shown(nearest(stated, fixed) or VACUUM)}, or "relative to COLUMN"'
        folder.findings.add(where, "must say what readings are relative to", shown(stated), do)
        return None
    if column in {"p_static", "p_total"}:
        do = f'write "relative to {column[2:]}"'
        folder.findings.add(where, f"{column} is a stream reading", shown(stated), do)
        return None
    found = Arrangement(pressures=stated if stated in fixed else column, stream=stream)
    if stream == "mach" and stated != COEFFICIENT:
        folder.findings.add(
            folder.at("stream.from"), f'"mach" goes with readings that are "{COEFFICIENT}" only',
            f'"mach" with readings {shown(stated)}', 'write "total and static", or another with pressures',
        )  # fmt: skip
        return None
    return found


def _read_tables(parts: Parts, chord: float, arrangement: Arrangement | None, folder: Folder) -> _Tables:
    section: Section | None = None
    tap_list: TapList | None = None
    taps: Taps | None = None
    points: PointList | None = None
    if parts.section is not None:
        with suppress(BrokenTableError):
            section = read_section(parts.section, chord, folder)
    if parts.taps is not None:
        with suppress(BrokenTableError):
            tap_list, taps = read_taps(parts.taps, section, chord, arrangement, folder)
    if parts.readings is not None and parts.readings.table is not None:
        with suppress(BrokenTableError):
            points = read_points(parts.readings.table, tap_list, arrangement, folder)
    elif parts.readings is not None and not parts.has_forecast:
        folder.findings.add(
            folder.at("readings"),
            "needs table, or the campaign a [forecast]",
            "nothing",
            'write table = "points.csv"',
        )
    return _Tables(section=section, tap_list=tap_list, taps=taps, points=points)


def _sources(parts: Parts, text: CampaignText, setting: Setting) -> tuple[Source, ...]:
    sources = []
    seen: dict[str, int] = {}
    for index, checked in parts.sources:
        if checked.part is None:
            continue
        name = checked.part.name
        whole = setting.folder.at(text.source_label(index))
        place = Place(folder=setting.folder, path=("source", index), whole=whole)
        if name in seen:
            first = text.source_label(seen[name])
            setting.folder.findings.add(
                place.at("name"),
                "must be a name of its own",
                f"{shown(name)}, the name of {first} too",
                "rename one",
            )
        seen.setdefault(name, index)
        found = read_source(checked.part, place, setting, doubtful=checked.doubtful)
        if found is not None:
            sources.append(found)
    return tuple(sources)


def _reduction(part: ReductionPart) -> Reduction:
    edge = part.trailing_edge
    return Reduction(
        integration=part.integration, spacing=part.spacing != "none",
        trailing_edge=Closure(cp=edge.cp, standard=edge.standard) if isinstance(edge, ClosurePart) else edge,
        compressibility=part.compressibility, reference_mach=part.reference_mach,
    )  # fmt: skip


def _intervals(part: IntervalsPart, folder: Folder) -> Intervals:
    fault = trials_fault(part.trials, folder.at("intervals.trials"))
    if fault is not None:
        folder.findings.add(fault.where, fault.rule, fault.got, fault.do)
    return Intervals(level=part.level, trials=trials_text(part.trials), seed=part.seed)


def _plan(parts: Parts, text: CampaignText, setting: Setting) -> Plan:
    stated: dict[str, SourcePart] = {c.part.name: c.part for _, c in parts.sources if c.part is not None}
    lines = dict(zip(parts.source_names or (), text.source_lines, strict=False))
    forecast = read_forecast(parts.forecast, setting) if parts.forecast else None
    limits = [(f"limit[{i + 1}]", part) for i, part in parts.limits]
    targets = [(f"target[{i + 1}]", part) for i, part in parts.targets]
    plan = Plan(
        polar=read_polar(parts.polar, setting),
        limits=tuple(read_limit(part, place, setting) for place, part in limits),
        targets=tuple(read_target(part, place, setting) for place, part in targets),
        forecast=forecast,
        slots=read_slots(parts.slots, stated, parts.source_names, setting),
        layout=read_layout(parts.layout, setting) if parts.layout else None,
        wiring=read_wiring(parts.wiring, setting) if parts.wiring else None, lines=lines,
    )  # fmt: skip
    ranges = [limit.alpha_range for limit in plan.limits] + [target.alpha_range for target in plan.targets]
    places = [f"{place}.alpha_range" for place, _ in [*limits, *targets]]
    check_reach(list(zip(places, ranges, strict=True)), forecast, setting)
    return plan
