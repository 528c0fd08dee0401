"""The figures of the report by matplotlib: functions that draw on an ``ax`` and return it.

Each takes the results first and ``ax`` last; without one it makes a figure of its own (``ax.figure``).
Colours, markers and line styles are those of the page, so that series stay apart in grey too.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from tapband.files.write_text import one_line
from tapband.nouns.errors import QuestionError
from tapband.report.drawing import COLOURS, INK, axes, look, styled
from tapband.report.headline import headline, keys, verdicts

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.axes import Axes

    from tapband.report.publish import Outcome

LARGEST = 5
"""Sources shown one by one; the rest together."""
LONG = 40
"""Longest name in a legend."""


@styled
def coefficient(results: Outcome, name: str, ax: Axes | None = None) -> Axes:
    """A coefficient against angle with its headline intervals, a series a run and configuration."""
    frame, ax = _with(results, name), axes(ax)
    shown, alpha = headline(frame, name), np.asarray(frame["alpha"], dtype=float)
    for i, (label, rows) in enumerate(_series(frame)):
        bars = np.stack([shown.estimate - shown.low, shown.high - shown.estimate])[:, rows]
        ax.errorbar(alpha[rows], shown.estimate[rows], yerr=np.maximum(bars, 0.0), label=label, **look(i))
    ax.set(
        xlabel="angle of attack [deg]",
        ylabel=f"{name} [1]",
        title=f"bars: {_percent(results)} coverage interval",
    )
    _legend(ax)
    return ax


@styled
def half_width(results: Outcome, name: str, ax: Axes | None = None) -> Axes:
    """Half the width of a coefficient's headline interval against angle, its targets, and doubted points."""
    frame, ax = _with(results, name), axes(ax)
    shown, alpha = headline(frame, name), np.asarray(frame["alpha"], dtype=float)
    for i, (label, rows) in enumerate(_series(frame)):
        ax.plot(alpha[rows], shown.half[rows], label=label, **look(i))
    odd = shown.from_trials
    if odd.any():
        ax.plot(
            alpha[odd], shown.half[odd], linestyle="none", label="not confirmed by Monte Carlo", marker="o",
            markersize=10, markerfacecolor="none", markeredgecolor=COLOURS[1],
        )  # fmt: skip
    targets = results.campaign.plan.targets if results.campaign else ()
    for verdict in verdicts(frame, [t for t in targets if t.coefficient == name]):
        if len(verdict.rows):
            at = alpha[verdict.rows]
            ax.hlines(verdict.target.expanded, at.min(), at.max(), color=INK, linestyle="--", label="target")
    ax.set(xlabel="angle of attack [deg]", ylabel=f"half-width, {_percent(results)}")
    ax.set_ylim(bottom=0.0)
    _legend(ax)
    return ax


@styled
def pressure(results: Outcome, point: str, ax: Axes | None = None) -> Axes:
    """Cp of one point along the chord with the band of its intervals, suction upwards."""
    ax, rows = axes(ax), _taps_of(results, point)
    x, cp, low, high = (np.asarray(rows[c], dtype=float) for c in ("x", "cp", "cp_low", "cp_high"))
    upper = _upper(results, rows)
    for i, (label, on) in enumerate((("upper surface", upper), ("lower surface", ~upper))):
        order = np.flatnonzero(on & np.isfinite(cp))
        order = order[np.argsort(x[order], kind="stable")]
        ax.fill_between(x[order], low[order], high[order], color=COLOURS[i], alpha=0.25, linewidth=0)
        ax.plot(x[order], cp[order], label=label, **look(i))
    ax.set(
        xlabel="x/c [1]",
        ylabel="Cp [1]",
        title=f"{_short(point)}; band: {_percent(results)} coverage interval",
    )
    ax.invert_yaxis()
    _legend(ax)
    return ax


@styled
def pressure_half_width(results: Outcome, point: str, ax: Axes | None = None) -> Axes:
    """Half the width of the band of Cp of one point along the chord."""
    ax, rows = axes(ax), _taps_of(results, point)
    x, half = np.asarray(rows["x"], dtype=float), np.asarray(rows["cp_U"], dtype=float)
    upper = _upper(results, rows)
    for i, (label, on) in enumerate((("upper surface", upper), ("lower surface", ~upper))):
        order = np.flatnonzero(on & np.isfinite(half))
        order = order[np.argsort(x[order], kind="stable")]
        ax.plot(x[order], half[order], label=label, **look(i))
    ax.set(xlabel="x/c [1]", ylabel=f"half-width, {_percent(results)}")
    ax.set_ylim(bottom=0.0)
    return ax


@styled
def contributors(results: Outcome, name: str, point: str | None = None, ax: Axes | None = None) -> Axes:
    """Shares of the largest sources in the variance of a coefficient, at one point or on the mean of all."""
    ax, share = axes(ax), _shares(results, name, point).sort_values(ascending=False)
    rest = float(share.iloc[2 * LARGEST :].sum())
    labels = [_short(str(source)) for source in share.index[: 2 * LARGEST]]
    values = [100 * float(v) for v in share.iloc[: 2 * LARGEST]]
    if rest > 0.0:
        labels, values = [*labels, f"{len(share) - 2 * LARGEST} more"], [*values, 100 * rest]
    places = np.arange(len(values))[::-1]
    ax.barh(places, values, color=COLOURS[0], height=0.6)
    ax.set_yticks(places, labels)
    where = _short(point) if point else "mean of all points"
    ax.set(xlabel="share of the variance [%]", title=f"{name}, {where}", xlim=(0.0, 100.0))
    ax.grid(visible=False, axis="y")
    return ax


@styled
def shares(results: Outcome, name: str, ax: Axes | None = None) -> Axes:
    """Shares of the largest sources against angle, points of the longest run and configuration."""
    frame, ax = _with(results, name), axes(ax)
    label, rows = max(_series(frame), key=lambda one: len(one[1]))
    budget = results.tables["budget"]
    budget = budget[np.asarray(budget["coefficient"].astype(object) == name)]
    table = budget.assign(key=keys(budget)).pivot_table(
        index="key", columns="source", values="share", sort=False
    )
    largest = table.mean().sort_values(ascending=False).index[:LARGEST]
    alpha, labels = np.asarray(frame["alpha"], dtype=float), keys(frame)
    for i, source in enumerate(largest):
        values = 100 * table[source].reindex([labels[r] for r in rows]).to_numpy(dtype=float)
        ax.plot(alpha[rows], values, label=_short(str(source)), **look(i))
    title = f"{name}, {label}" if label else name
    ax.set(xlabel="angle of attack [deg]", ylabel="share of the variance [%]", title=title)
    ax.set_ylim(bottom=0.0)
    _legend(ax)
    return ax


def _with(results: Outcome, name: str) -> pd.DataFrame:
    frame = results.tables["coefficients"]
    if f"{name}_U" not in frame.columns:
        raise QuestionError(
            f"figure: needs a coefficient of these results; got {name!r}; name one such as cl"
        )
    return frame


def _series(frame: pd.DataFrame) -> list[tuple[str, Sequence[int]]]:
    """Rows of each run and configuration in order of angle, and what the series is called."""
    alpha = np.asarray(frame["alpha"], dtype=float)
    columns = [frame[c].astype(object).tolist() for c in ("run", "config") if c in frame.columns]
    groups: dict[str, list[int]] = {}
    for i, parts in enumerate(zip(*columns, strict=True) if columns else [()] * len(frame)):
        groups.setdefault(", ".join(str(p) for p in parts if isinstance(p, str) and p), []).append(i)
    return [(_short(name), sorted(rows, key=lambda r: alpha[r])) for name, rows in groups.items()]


def _taps_of(results: Outcome, point: str) -> pd.DataFrame:
    frame = results.tables["cp"]
    labels = np.array(keys(frame), dtype=object)
    on = labels == point
    if not on.any():
        on = np.asarray(frame["point"].astype(object) == point)
    rows: pd.DataFrame = frame.loc[on]
    if rows.empty or len(set(labels[on])) > 1:
        got = "none" if rows.empty else ", ".join(sorted(set(labels[on])))
        raise QuestionError(f"figure: needs one point named {point!r}; got {got}; write RUN/POINT")
    return rows


def _upper(results: Outcome, rows: pd.DataFrame) -> np.ndarray:
    """Which taps lie on the upper surface: as the campaign has them, else by their side of the chord."""
    if results.campaign is None:
        return np.asarray(rows["y"], dtype=float) >= 0.0
    side = dict(zip(results.campaign.taps.names, results.campaign.taps.upper.tolist(), strict=True))
    return np.array([side[tap] for tap in rows["tap"]], dtype=bool)


def _shares(results: Outcome, name: str, point: str | None) -> pd.Series[float]:
    frame = results.tables["budget"]
    on = np.asarray(frame["coefficient"].astype(object) == name)
    if point is not None:
        labels = np.array(keys(frame), dtype=object)
        on = on & ((labels == point) | np.asarray(frame["point"].astype(object) == point))
    if not on.any():
        raise QuestionError(
            f"figure: needs a budget of {name!r}; got none at {point or 'any point'}; name another"
        )
    rows = frame[on]
    return rows["share"].groupby(rows["source"].astype(object), sort=False).mean()


def _percent(results: Outcome) -> str:
    return f"{100 * float(str(results.meta.get('level', 0.95))):g} %"


def _short(name: str) -> str:
    line = one_line(name)
    return line if len(line) <= LONG else f"{line[: LONG - 1]}…"


def _legend(ax: Axes) -> None:
    handles, labels = ax.get_legend_handles_labels()
    named = {label: handle for handle, label in zip(handles, labels, strict=True) if label}
    if named:
        ax.legend(list(named.values()), list(named), loc="best")
