"""The picture of what the wiring costs: four wirings of the same taps, and the interval each would give."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from tapband.files.write_text import one_line
from tapband.nouns.errors import QuestionError
from tapband.questions.rank_wiring import ARRANGEMENTS, members
from tapband.report.drawing import COLOURS, INK, LINE, MARKERS, SOFT, axes, styled
from tapband.report.headline import keys
from tapband.report.rounding import significant

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.axes import Axes

    from tapband.nouns.campaign import Campaign
    from tapband.report.publish import Outcome

WORDS = ("every tap\nits own", "all taps\non one", "as wired", "interleaved")
KEYS = tuple(name.replace(" ", "_") for name in ARRANGEMENTS)
DRAWN = 0.36
"""Part of the width that the small sections take."""


@styled
def wiring(
    results: Outcome, name: str, point: str, source: str | None = None, ax: Axes | None = None
) -> Axes:
    """Interval of a coefficient with a source of tap pressure shared in four ways; by default all of them.

    Beside each interval the section with its taps, those that share one error marked alike; the thick bar
    is what the rewired errors make alone.
    """
    ax, row = axes(ax), _row(results, name, point, source)
    estimate, k = _estimate(results, name, point)
    half = np.array([float(row[f"U_{a}"]) for a in KEYS])
    alone = k * np.array([float(row[f"contribution_{a}"]) for a in KEYS])
    declared, widest = float(row["U"]), float(np.nanmax([*half, float(row["U"])]))
    at = np.arange(4.0)[::-1]
    ax.axvspan(
        estimate - declared, estimate + declared, color=LINE, alpha=0.6, linewidth=0, label="as declared"
    )
    ax.axvline(estimate, color=SOFT, linewidth=0.8)
    ax.hlines(
        at, estimate - alone, estimate + alone, color=COLOURS[0], linewidth=6.0, alpha=0.45, label="alone"
    )
    ax.errorbar(
        np.full(4, estimate), at, xerr=half, linestyle="none", marker="o", color=COLOURS[0], capsize=5,
        label="with all other errors",
    )  # fmt: skip
    for y, value in zip(at, half, strict=True):
        text = f"± {significant(float(value), 3)}" if np.isfinite(value) else "no modules named"
        ax.annotate(
            text, (estimate, y), (0, 7), textcoords="offset points", ha="center", color=INK, fontsize=8.5
        )
    ax.set_yticks(at, WORDS)
    ax.set_ylim(-0.6, 3.6)
    room = 2.3 * widest * DRAWN / (1.0 - DRAWN) if results.campaign is not None else 0.0
    ax.set_xlim(estimate - 1.15 * widest - room, estimate + 1.15 * widest)
    ax.set(xlabel=f"{name} [1]", title=_title(row, point))
    ax.grid(visible=False, axis="y")
    ax.legend(loc="upper center", bbox_to_anchor=(0.5, -0.13), ncols=3)
    if results.campaign is not None:
        _sections(ax, results.campaign, str(row["declared"]))
    return ax


def _title(row: pd.Series[Any], point: str) -> str:
    who = one_line(str(row["source"])).strip("()")
    return f"{one_line(point)}: the errors of {who}, wired in four ways"


def _sections(ax: Axes, campaign: Campaign, across_taps: str) -> None:
    """A small section at the left of each row, the taps that share an error in one colour and shape."""
    section, taps = campaign.section, campaign.taps
    live = ~taps.excluded
    low, high = ax.get_ylim()
    for place, groups in enumerate(members(across_taps, campaign)):
        middle = (3.0 - place - low) / (high - low)
        small = ax.inset_axes((0.01, middle - 0.11, DRAWN - 0.03, 0.22))
        small.plot(section.x, section.y, color=SOFT, linewidth=0.8)
        small.margins(0.08, 0.25)
        small.set_aspect("equal")
        small.set_axis_off()
        if groups is None:
            continue
        if place == 0:
            small.plot(
                taps.x[live], taps.y[live], linestyle="none", marker="o", markersize=3.4, markerfacecolor="white",
                markeredgecolor=COLOURS[0], markeredgewidth=0.8,
            )  # fmt: skip
            continue
        for i, group in enumerate(sorted({g for g, on in zip(groups, live.tolist(), strict=True) if on})):
            on = live & np.array([g == group for g in groups])
            small.plot(
                taps.x[on], taps.y[on], linestyle="none", marker=MARKERS[i % 4], markersize=3.4,
                color=COLOURS[i % 6], markerfacecolor=COLOURS[i % 6] if i % 2 == 0 else "white",
            )  # fmt: skip


def _row(results: Outcome, name: str, point: str, source: str | None) -> pd.Series[Any]:
    """The row asked for; without a source the last one of the point: all sources together, or the only one."""
    if "wiring_comparison" not in results.tables:
        raise QuestionError("figure: needs the table wiring_comparison; got results without it; reduce anew")
    frame = results.tables["wiring_comparison"]
    labels = np.array(keys(frame), dtype=object)
    on = (labels == point) | np.asarray(frame["point"].astype(object) == point)
    on &= np.asarray(frame["coefficient"].astype(object) == name)
    if source is not None:
        on &= np.asarray(frame["source"].astype(object) == source)
    if not on.any() or len(set(labels[on].tolist())) > 1:
        asked = f"{name!r} at {point!r}" + ("" if source is None else f" of {source!r}")
        raise QuestionError(
            f"figure: needs a source of tap pressure and one point; got {asked}; name another"
        )
    found: pd.Series[Any] = frame.loc[on].iloc[-1]
    return found


def _estimate(results: Outcome, name: str, point: str) -> tuple[float, float]:
    """Estimate of the coefficient and its coverage factor as declared."""
    frame = results.tables["coefficients"]
    labels = np.array(keys(frame), dtype=object)
    on = (labels == point) | np.asarray(frame["point"].astype(object) == point)
    return float(frame.loc[on, name].iloc[0]), float(frame.loc[on, f"{name}_k"].iloc[0])
