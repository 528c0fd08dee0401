"""What drives a coefficient, drawn by matplotlib on an ``ax``: groups, taps, angle, wiring.

Each takes the results first and ``ax`` last; without one it makes a figure of its own (``ax.figure``).
Series differ in marker, line or filling as well as in colour, so that they stay apart in grey.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.contour import Contour
from tapband.files.write_text import one_line
from tapband.nouns.errors import QuestionError
from tapband.questions.rank_order import carriers
from tapband.questions.rank_taps import NOT_AT_A_TAP
from tapband.report.drawing import COLOURS, INK, LINE, SOFT, axes, look, styled
from tapband.report.headline import keys
from tapband.report.rounding import fixed

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.axes import Axes

    from tapband.nouns.campaign import Campaign
    from tapband.report.publish import Outcome

Array = NDArray[np.float64]
LARGEST = 6
"""Groups shown one by one."""
LONG = 32
"""Longest name shown."""
REACH = 0.28
"""Length of the longest bar on a section [chords]."""
NAMED = 8
"""Most taps named in a figure."""
LIGHT = 0.6
"""Shares above this are written in white on their dark cell."""


@styled
def groups(results: Outcome, name: str, point: str, ax: Axes | None = None) -> Axes:
    """The three answers on one point: linear shares as bars, Sobol' indices with their intervals as marks."""
    ax, rows = axes(ax), _rows(results, "ranking", name, point).sort_values("rank", kind="stable")
    rows = rows.head(2 * LARGEST)
    at = np.arange(len(rows))[::-1].astype(float)
    ax.barh(at, 100 * _numbers(rows, "linear_share"), color=COLOURS[0], height=0.5, label="linear share")
    for shift, key, label, i in ((0.13, "first_order", "first order", 1), (-0.13, "total", "total", 5)):
        value, half = 100 * _numbers(rows, key), 100 * _numbers(rows, f"{key}_ci")
        ax.errorbar(
            value, at + shift, xerr=half, label=f"Sobol' {label}", color=COLOURS[i], marker="os"[i == 5],
            linestyle="none", markerfacecolor="white", markersize=5,
        )  # fmt: skip
    ax.set_yticks(at, [_short(g) for g in rows["group"]])
    ax.set(xlabel="part of the variance [%]", title=f"{name}, {_short(point)}")
    ax.set_xlim(left=min(0.0, ax.get_xlim()[0]), right=max(100.0, ax.get_xlim()[1]))
    ax.grid(visible=False, axis="y")
    ax.legend(loc="lower right")
    return ax


@styled
def taps_along_chord(results: Outcome, name: str, point: str, ax: Axes | None = None) -> Axes:
    """Share of each tap along the chord, a stem a tap; the taps that carry 90 % are named."""
    ax, rows = axes(ax), _taps(results, name, point)
    x, share = _numbers(rows, "x"), 100 * _numbers(rows, "share")
    upper = _upper(results, rows)
    for i, (label, on) in enumerate((("upper surface", upper), ("lower surface", ~upper))):
        style = look(i)
        ax.vlines(x[on], 0.0, share[on], color=style["color"], linewidth=1.2)
        ax.plot(x[on], share[on], linestyle="none", label=label, color=style["color"], marker=style["marker"])
    ax.axhline(0.0, color=SOFT, linewidth=0.8)
    found = carriers(share / 100)
    for i in found[: NAMED // 2]:
        ax.annotate(
            _short(rows["tap"].iloc[i]), (x[i], share[i]), (5, 3), textcoords="offset points", fontsize=8
        )
    ax.set(
        xlabel="x/c [1]", ylabel="share of the variance [%]", title=_said(results, name, point, len(found))
    )
    ax.legend(loc="best")
    return ax


@styled
def taps_on_section(results: Outcome, name: str, point: str, ax: Axes | None = None) -> Axes:
    """Shares as bars that stand on the section's outline; hollow ones are negative (what others bring in)."""
    ax, rows, campaign = axes(ax), _taps(results, name, point), _campaign(results)
    contour = Contour.of(campaign.section.x, campaign.section.y)
    share, s = _numbers(rows, "share"), campaign.taps.s
    tx, ty = contour.tangent(s)
    x, y = contour.point(s)
    length = REACH * np.abs(share) / max(float(np.nanmax(np.abs(share))), 1e-300)
    # The outward normal lies to the left of the way from the lower edge round the nose to the upper one.
    end_x, end_y = x - ty * length, y + tx * length
    ax.plot(campaign.section.x, campaign.section.y, color=INK, linewidth=1.2)
    for sign, label, dash in ((1.0, "positive", "-"), (-1.0, "negative", (0, (2, 1.5)))):
        colour, width = COLOURS[0 if sign > 0.0 else 1], 2.6 if sign > 0.0 else 1.6
        for i in np.flatnonzero(share * sign > 0.0).tolist():
            ends = [x[i], end_x[i]], [y[i], end_y[i]]
            ax.plot(*ends, color=colour, linewidth=width, linestyle=dash, solid_capstyle="butt")
        ax.plot([], [], color=colour, linewidth=width, linestyle=dash, label=label)
    ax.plot(x, y, linestyle="none", marker="o", markersize=2.5, color=SOFT)
    found = carriers(share)
    for i in found[: NAMED // 2]:
        ahead = end_x[i] < x[i]
        ax.annotate(
            _short(rows["tap"].iloc[i]), (end_x[i], end_y[i]), (-4 if ahead else 4, 3),
            textcoords="offset points", fontsize=8, ha="right" if ahead else "left",
        )  # fmt: skip
    largest = f"longest bar: {100 * float(np.nanmax(np.abs(share))):.1f} %"
    ax.set(xlabel="x/c [1]", ylabel="y/c [1]", title=f"{_said(results, name, point, len(found))}; {largest}")
    ax.margins(x=0.12)
    ax.set_aspect("equal", adjustable="datalim")
    if np.any(share < 0.0):
        ax.legend(loc="upper right")
    return ax


@styled
def shares(results: Outcome, name: str, ax: Axes | None = None) -> Axes:
    """Linear shares of the largest groups against angle, a line style a group, a dot a point of any run."""
    ax, frame = axes(ax), _table(results, "ranking")
    frame = frame[np.asarray(frame["coefficient"].astype(object) == name)]
    if frame.empty:
        raise QuestionError(f"figure: needs a ranking of a coefficient; got {name!r}; name one such as cl")
    table = frame.assign(key=keys(frame)).pivot_table(
        index="key", columns="group", values="linear_share", sort=False
    )
    alpha = _alpha(results, table.index.tolist())
    order = np.argsort(alpha, kind="stable")
    largest = table.max().sort_values(ascending=False, kind="stable").index[:LARGEST]
    for i, group in enumerate(largest):
        ax.plot(alpha[order], 100 * table[group].to_numpy(dtype=float)[order], label=_short(group), **look(i))
    ax.set(xlabel="angle of attack [deg]", ylabel="share of the variance [%]", title=name, ylim=(0.0, 102.0))
    ax.legend(loc="best", ncols=2)
    return ax


@styled
def drivers(results: Outcome, ax: Axes | None = None) -> Axes:
    """The leading group of every point and coefficient: a letter a group, the darker the larger its share."""
    ax, frame = axes(ax), _table(results, "ranking")
    frame = frame[~frame["coefficient"].astype(str).str.endswith("_ref")]
    names = list(dict.fromkeys(frame["coefficient"].astype(object)))
    all_keys = np.array(keys(frame), dtype=object)
    points = list(dict.fromkeys(all_keys.tolist()))
    order = np.argsort(_alpha(results, points), kind="stable")
    points = [points[i] for i in order]
    first = frame.assign(key=all_keys)[np.asarray(frame["rank"] == 1)].drop_duplicates(["key", "coefficient"])
    lead = {(r["key"], r["coefficient"]): (r["group"], float(r["linear_share"])) for _, r in first.iterrows()}
    letters = {g: chr(65 + i % 26) for i, g in enumerate(dict.fromkeys(g for g, _ in lead.values()))}
    share = np.array([[lead.get((p, c), ("", np.nan))[1] for p in points] for c in names])
    ax.imshow(share, cmap="Greys", vmin=0.0, vmax=1.0, aspect="auto", interpolation="nearest")
    for j, c in enumerate(names):
        for i, p in enumerate(points):
            group, value = lead.get((p, c), ("", np.nan))
            if group and len(points) <= 40:
                ax.text(
                    i, j, letters[group], ha="center", va="center", color="white" if value > LIGHT else INK
                )
    ax.set_yticks(np.arange(len(names)), names)
    alpha = _alpha(results, points)
    step = max(1, len(points) // 14)
    ax.set_xticks(np.arange(0, len(points), step), [fixed(float(a), 1) for a in alpha[::step]])
    key = ";  ".join(f"{letter} {_short(group)}" for group, letter in letters.items())
    ax.set(
        xlabel=f"angle of attack of each point [deg]\n{key}",
        title="leading group; the darker, the larger its share",
    )
    ax.grid(visible=False)
    return ax


@styled
def indices_agree(results: Outcome, name: str, ax: Axes | None = None) -> Axes:
    """Total index against linear share of every point and group; off the line, products or curvature speak."""
    ax, frame = axes(ax), _table(results, "ranking")
    rows = frame[np.asarray(frame["coefficient"].astype(object) == name)]
    share, total, half = (_numbers(rows, c) for c in ("linear_share", "total", "total_ci"))
    ax.plot([0.0, 1.0], [0.0, 1.0], color=LINE, linewidth=1.2, zorder=0)
    ax.errorbar(share, total, yerr=half, linestyle="none", **{k: look(0)[k] for k in ("color", "marker")})
    ax.set(xlabel="linear share [1]", ylabel="Sobol' total index [1]", title=name)
    return ax


def _table(results: Outcome, table: str) -> pd.DataFrame:
    if table not in results.tables:
        raise QuestionError(
            f"figure: needs the table {table}; got results without it; reduce the campaign anew"
        )
    return results.tables[table]


def _rows(results: Outcome, table: str, name: str, point: str) -> pd.DataFrame:
    """Rows of one coefficient at one point, POINT or RUN/POINT."""
    frame = _table(results, table)
    frame = frame[np.asarray(frame["coefficient"].astype(object) == name)]
    labels = np.array(keys(frame), dtype=object)
    on = labels == point
    if not on.any():
        on = np.asarray(frame["point"].astype(object) == point)
    rows: pd.DataFrame = frame.loc[on]
    if rows.empty or len(set(labels[on].tolist())) > 1:
        got = "none" if rows.empty else ", ".join(sorted(set(labels[on].tolist())))
        raise QuestionError(
            f"figure: needs {name!r} at one point named {point!r}; got {got}; write RUN/POINT"
        )
    return rows


def _taps(results: Outcome, name: str, point: str) -> pd.DataFrame:
    rows = _rows(results, "tap_ranking", name, point)
    return rows[np.asarray(rows["tap"].astype(object) != NOT_AT_A_TAP)]


def _said(results: Outcome, name: str, point: str, count: int) -> str:
    rows = _rows(results, "tap_ranking", name, point)
    away = rows[np.asarray(rows["tap"].astype(object) == NOT_AT_A_TAP)]
    at_taps = 100 * (1.0 - float(away["share"].iloc[0]))
    return f"{name}, {_short(point)}: {at_taps:.0f} % at taps, 90 % of that at {count}"


def _campaign(results: Outcome) -> Campaign:
    if results.campaign is None:
        raise QuestionError(
            "figure: needs the contour; got results read back without it; reduce the campaign anew"
        )
    return results.campaign


def _upper(results: Outcome, rows: pd.DataFrame) -> NDArray[np.bool_]:
    """Which taps lie on the upper surface: as the campaign has them, else by their side of the chord."""
    if results.campaign is None:
        return np.asarray(_numbers(rows, "y") >= 0.0)
    return results.campaign.taps.upper


def _alpha(results: Outcome, points: list[str]) -> Array:
    """Angle [deg] of points by their keys."""
    frame = results.tables["coefficients"]
    angle = dict(zip(keys(frame), _numbers(frame, "alpha").tolist(), strict=True))
    return np.array([angle[point] for point in points])


def _numbers(frame: pd.DataFrame, column: str) -> Array:
    return np.asarray(frame[column], dtype=float)


def _short(name: object) -> str:
    line = one_line(str(name))
    return line if len(line) <= LONG else f"{line[: LONG - 1]}…"
