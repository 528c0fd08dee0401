"""The campaign file as its parts: each table checked by itself, so that one fault hides no other."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, TypeVar

from tapband.files.campaign_text import CampaignText
from tapband.files.faults import Findings, nearest, shown
from tapband.files.fields import Part
from tapband.files.model import (
    IntervalsPart,
    ReadingsPart,
    ReductionPart,
    SectionPart,
    SourcePart,
    StreamPart,
    TapsPart,
)  # fmt: skip
from tapband.files.model_plan import (
    CampaignPart,
    ForecastPart,
    LayoutPart,
    LimitPart,
    PolarPart,
    SlotPart,
    TargetPart,
    WiringPart,
)  # fmt: skip
from tapband.files.validate import Checked, check

M = TypeVar("M", bound=Part)


@dataclass(frozen=True, slots=True, kw_only=True)
class Parts:
    """The parts; None where one is absent or too little of it stands. Lists keep their index in the file."""

    title: str
    section: SectionPart | None
    taps: TapsPart | None
    readings: ReadingsPart | None
    stream: StreamPart | None
    reduction: ReductionPart
    intervals: IntervalsPart
    sources: tuple[tuple[int, Checked[SourcePart]], ...]
    source_names: tuple[str, ...] | None
    """Names as they stand in the file, usable or not; None where sources are no list."""
    polar: PolarPart
    limits: tuple[tuple[int, LimitPart], ...]
    forecast: ForecastPart | None
    has_forecast: bool
    targets: tuple[tuple[int, TargetPart], ...]
    slots: tuple[tuple[int, SlotPart], ...]
    layout: LayoutPart | None
    wiring: WiringPart | None


def read_parts(text: CampaignText, findings: Findings) -> Parts:
    """Every part of the file; what is missing, unknown or of the wrong kind is noted."""
    document, file = text.document, text.file
    _check_top(document, file, findings)

    def one(model: type[M], key: str) -> M | None:
        return check(model, document[key], file, (key,), findings).part if key in document else None

    def many(model: type[M], key: str) -> tuple[tuple[int, M], ...]:
        found = _many(model, key, text, findings)
        return tuple((i, item.part) for i, item in found if item.part is not None)

    return Parts(
        title=document["title"] if isinstance(document.get("title"), str) else "",
        section=one(SectionPart, "section"), taps=one(TapsPart, "taps"),
        readings=one(ReadingsPart, "readings"), stream=one(StreamPart, "stream"),
        reduction=one(ReductionPart, "reduction") or ReductionPart(),
        intervals=one(IntervalsPart, "intervals") or IntervalsPart(),
        sources=_many(SourcePart, "source", text, findings), source_names=_names(document),
        polar=one(PolarPart, "polar") or PolarPart(), limits=many(LimitPart, "limit"),
        forecast=one(ForecastPart, "forecast"), has_forecast="forecast" in document,
        targets=many(TargetPart, "target"), slots=many(SlotPart, "slot"), layout=one(LayoutPart, "layout"),
        wiring=one(WiringPart, "wiring"),
    )  # fmt: skip


def _check_top(document: dict[str, Any], file: str, findings: Findings) -> None:
    """Keys of the top level: format, required tables, unknown ones."""
    known = list(CampaignPart.model_fields)
    offered = set()
    for key in document:
        if key not in known:
            near = nearest(key, known)
            offered.add(near)
            do = f"write {near}" if near else "known keys: " + ", ".join(known)
            findings.add(f"{file}, {key}", "unknown key", shown(key), do)
    if "format" not in document:
        if "format" not in offered:
            findings.add(f"{file}, top level", "needs format", "nothing", "write format = 1")
    elif document["format"] != 1 or isinstance(document["format"], (bool, float)):
        findings.add(f"{file}, format", "must be 1", shown(document["format"]), "write format = 1")
    title = document.get("title", "")
    if not isinstance(title, str):
        findings.add(f"{file}, title", "must be text in quotes", shown(title), 'write title = "..."')
    needed = {
        "section": "contour and chord",
        "taps": "table",
        "readings": "table and pressures",
        "stream": "from",
    }
    for key, keys in needed.items():
        if key not in document and key not in offered:
            findings.add(
                f"{file}, top level", f"needs the table [{key}]", "nothing", f"write [{key}] with {keys}"
            )


def _many(
    model: type[M], key: str, text: CampaignText, findings: Findings
) -> tuple[tuple[int, Checked[M]], ...]:
    """The tables of a list, each checked by itself."""
    items = text.document.get(key, [])
    if not isinstance(items, list):
        findings.add(f"{text.file}, {key}", "must be a list of tables", shown(items), f"write [[{key}]]")
        return ()
    found = []
    for i, item in enumerate(items):
        label = text.source_label(i) if key == "source" else ""
        found.append((i, check(model, item, text.file, (key, i), findings, label)))
    return tuple(found)


def _names(document: dict[str, Any]) -> tuple[str, ...] | None:
    items = document.get("source", [])
    if not isinstance(items, list):
        return None
    tables = [item for item in items if isinstance(item, dict)]
    return tuple(item["name"] for item in tables if isinstance(item.get("name"), str))
