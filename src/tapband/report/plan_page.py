"""The page of a plan: whether the test is ready, what to buy, how to wire it, where the taps go."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

import numpy as np
from markupsafe import Markup

from tapband.files.write_text import one_line
from tapband.report import summary
from tapband.report.parts import parts_of
from tapband.report.parts_shown import SHOWN
from tapband.report.plan_sketch import frontier_sketch, layouts_sketch, ranges_sketch
from tapband.report.render import WALLS, asset, lines_of, page_templates
from tapband.report.rounding import significant

if TYPE_CHECKING:
    import pandas as pd

    from tapband.nouns.campaign import Campaign

LAYOUT: Mapping[str, tuple[str, tuple[str, ...]]] = {
    "choices": ("What to buy", ("selection", "frontier", "options")),
    "sources": ("How good each source must be", ("allowances",)),
    "seen": ("What the channels will see", ("ranges",)),
    "places": ("Wiring and taps", ("wirings", "layouts", "wiring", "layout")),
    "time": ("How long to average", ("averaging",)),
    "held": ("Targets at every point", ("targets",)),
}
"""Sections by anchor: title and tables."""


def plan_report(
    tables: Mapping[str, pd.DataFrame], meta: Mapping[str, object], notes: Sequence[str], campaign: Campaign
) -> str:
    """The whole page as text; it needs no script."""
    shown = {name: SHOWN.get(name, (name.replace("_", " "), "", ())) for name in tables}
    return (
        page_templates()
        .get_template("plan")
        .render(
            style=Markup(asset("style.css")),
            title=one_line(campaign.title or campaign.name),
            lead=_lead(campaign),
            targets=_targets(tables.get("targets")),
            notes=[one_line(note) for note in notes],
            undeclared=lines_of(meta.get("undeclared")),
            parts=parts_of(tables, LAYOUT, shown),
            figures={
                "choices": _frontier(tables.get("frontier")),
                "seen": _ranges(tables.get("ranges")),
                "places": _layouts(tables.get("layouts")),
            },
            facts=summary.facts(meta, campaign),
            cautions=lines_of(meta.get("cautions")) or [WALLS],
            inputs=list(campaign.inputs.items()),
            listing=campaign.declared.splitlines(),
        )
    )


def _lead(campaign: Campaign) -> str:
    points = len(campaign.points.names) if campaign.points else 0
    level = f"{100 * campaign.intervals.level:g} %"
    return f"{points} points planned; {len(campaign.taps.names)} taps; {level} coverage intervals"


def _targets(frame: pd.DataFrame | None) -> list[dict[str, object]]:
    """Each target once, over the points it names."""
    if frame is None or frame.empty:
        return []
    out: list[dict[str, object]] = []
    for (coefficient, size), rows in frame.groupby(["coefficient", "target"], sort=False):
        count, half = len(rows), np.asarray(rows["U"], dtype=float)
        missed = int((rows["met"].astype(object) != "yes").sum())
        out.append(
            {
                "what": f"{coefficient} ± {size:g}", "met": "no" if missed else "yes",
                "verdict": f"missed at {missed} of {count} points" if missed else f"met at all {count} points",
                "widest": f"widest ± {significant(float(np.max(half)), 2)}",
            }
        )  # fmt: skip
    return out


def _frontier(frame: pd.DataFrame | None) -> Markup | None:
    return None if frame is None or frame.empty else frontier_sketch(frame)


def _ranges(frame: pd.DataFrame | None) -> Markup | None:
    return None if frame is None or frame.empty else ranges_sketch(frame)


def _layouts(frame: pd.DataFrame | None) -> Markup | None:
    return None if frame is None or frame.empty else layouts_sketch(frame)
