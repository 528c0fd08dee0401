"""The report: one HTML file that needs nothing from anywhere else."""

from __future__ import annotations

from base64 import b64encode
from collections.abc import Sequence
from hashlib import sha256
from importlib.resources import files
from typing import TYPE_CHECKING

from jinja2 import DictLoader, Environment, StrictUndefined
from markupsafe import Markup

from tapband.files.write_columns import COEFFICIENTS
from tapband.files.write_text import one_line
from tapband.report import summary
from tapband.report.headline import coefficients_of
from tapband.report.packing import embedded
from tapband.report.page_data import page_data
from tapband.report.parts import parts_of
from tapband.report.parts_shown import LAYOUT, SHOWN
from tapband.report.sketch import polar_sketch

if TYPE_CHECKING:
    from tapband.nouns.campaign import Campaign
    from tapband.report.publish import Outcome

SCRIPTS = (
    "quantile.js",
    "budget.js",
    "rounding.js",
    "draw.js",
    "figures.js",
    "ranks.js",
    "page.js",
    "live.js",
)
WIRING_MARKS = (
    ("independent", "s0", "M4 6a4 4 0 1 0 8 0a4 4 0 1 0 -8 0"),
    ("common", "s1", "M4 2h8v8h-8z"),
    ("by module, as wired", "s2", "M8 1.2l4.6 8h-9.2z"),
    ("interleaved", "s3", "M8 .6l5.4 5.4l-5.4 5.4l-5.4 -5.4z"),
)
WALLS = (
    "No value is corrected for the walls of the tunnel, and cd_pressure is not the total drag: "
    "taps do not see friction."
)


def report(results: Outcome, campaign: Campaign) -> str:
    """The whole page as text."""
    page = page_templates().get_template("page")
    script = '(() => {\n"use strict";\n' + "\n".join(asset(name) for name in SCRIPTS) + "\n})();"
    return page.render(
        style=Markup(asset("style.css")),
        script=Markup(script),
        script_hash=f"sha256-{b64encode(sha256(script.encode()).digest()).decode()}",
        data=Markup(embedded(page_data(results, campaign))),
        **_words(results, campaign),
    )


def page_templates() -> Environment:
    """The templates of every page; whatever they show is escaped."""
    names = {"page": "page.html.j2", "plan": "plan.html.j2", "tables": "tables.html.j2"}
    return Environment(
        loader=DictLoader({name: asset(file) for name, file in names.items()}), autoescape=True,
        undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True,
    )  # fmt: skip


def asset(name: str) -> str:
    """A file that stands beside this module."""
    return files("tapband.report").joinpath(name).read_text(encoding="utf-8")


def _words(results: Outcome, campaign: Campaign) -> dict[str, object]:
    frame, meta = results.tables["coefficients"], results.meta
    known = coefficients_of(frame)
    main = [name for name in summary.MAIN if name in known] or list(known[:3])
    percent = f"{100 * campaign.intervals.level:g} %"
    doubts = summary.doubt_words(frame)
    budget = results.tables.get("budget")
    return {
        "title": one_line(campaign.title or campaign.name),
        "forecast": meta.get("kind") == "forecast",
        "lead": _lead(results, campaign, percent),
        "percent": percent,
        "targets": summary.target_words(frame, campaign, results.tables.get("targets")),
        "sketches": [polar_sketch(frame, name, percent) for name in main],
        "driver_of": main[0] if main else "",
        "drivers": summary.driver_words(budget, main[0], campaign) if main else [],
        "unconfirmed": [doubt for doubt in doubts if doubt["name"] in COEFFICIENTS],
        "unconfirmed_elsewhere": ", ".join(
            f"{doubt['name']} at {doubt['count']}" for doubt in doubts if doubt["name"] not in COEFFICIENTS
        ),
        "unconfirmed_total": sum(int(str(doubt["count"])) for doubt in doubts),
        "empty": summary.empty_words(frame),
        "warnings": lines_of(meta.get("warnings")),
        "undeclared": lines_of(meta.get("undeclared")),
        "walls": WALLS,
        "point_tables": summary.point_tables(frame),
        "tap_parts": results.reduced is not None,
        "correlation": len(results.tables.get("correlation", ())) > 0,
        "tap_shares": len(results.tables.get("tap_ranking", ())) > 0,
        "wirings": len(results.tables.get("wiring_comparison", ())) > 0,
        "groups": len(results.tables.get("ranking", ())) > 0,
        "wiring_marks": WIRING_MARKS,
        "parts": parts_of(results.tables, LAYOUT, SHOWN),
        "facts": summary.facts(meta, campaign),
        "corrections": lines_of(meta.get("corrections")),
        "cautions": lines_of(meta.get("cautions")) or [WALLS],
        "inputs": list(campaign.inputs.items()),
        "listing": campaign.declared.splitlines(),
    }


def _lead(results: Outcome, campaign: Campaign, percent: str) -> str:
    frame = results.tables["coefficients"]
    points = "1 point" if len(frame) == 1 else f"{len(frame)} points"
    runs = list(
        dict.fromkeys(str(run) for run in frame["run"].astype(object) if isinstance(run, str) and run)
    )
    said = f", runs {', '.join(runs[:6])}{', …' if len(runs) > 6 else ''}" if runs else ""
    return one_line(f"{points}{said}; {len(campaign.taps.names)} taps; {percent} coverage intervals")


def lines_of(value: object) -> list[str]:
    """The lines of a list, each on one line; empty where it is no list."""
    listed = value if isinstance(value, Sequence) and not isinstance(value, str) else []
    return [one_line(str(line)) for line in listed]
