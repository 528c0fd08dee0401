"""Figures of a plan by matplotlib: cost against interval, ranges against full scale, allowances."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from tapband.files.write_text import one_line
from tapband.report.drawing import COLOURS, INK, MARKERS, axes, styled
from tapband.report.figure_files import figure_of, save

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure


@styled
def frontier(table: pd.DataFrame, ax: Axes | None = None) -> Axes:
    """Cost of every efficient set of options against its widest interval over the target."""
    ax, rows = axes(ax), table.sort_values("cost")
    cost, ratio = (np.asarray(rows[c], dtype=float) for c in ("cost", "worst_ratio"))
    ax.step(cost, ratio, where="post", color=COLOURS[0], marker="o")
    ax.axhline(1.0, color=INK, linestyle="--", label="every target met below")
    ax.set(xlabel="cost [as stated]", ylabel="widest interval over its target [1]")
    ax.legend(loc="best")
    return ax


@styled
def ranges(table: pd.DataFrame, ax: Axes | None = None) -> Axes:
    """What each channel with a full scale will see, against that full scale."""
    ax, rows = axes(ax), table.loc[np.isfinite(np.asarray(table["full_scale"], dtype=float))]
    place = np.arange(len(rows))
    low, high, full = (np.asarray(rows[c], dtype=float) / 1e3 for c in ("lowest", "highest", "full_scale"))
    ax.vlines(place, low, high, color=COLOURS[0], linewidth=3, label="will see")
    for sign, label in ((1, "full scale"), (-1, "_mirrored")):
        ax.hlines(sign * full, place - 0.5, place + 0.5, color=INK, linestyle="--", label=label)
    every = max(1, len(rows) // 20)
    names = [one_line(str(name))[:12] for name in rows["tap"]]
    ax.set_xticks(place[::every], names[::every], rotation=90)
    ax.set(xlabel="channel", ylabel="pressure [kPa]")
    ax.legend(loc="lower center", bbox_to_anchor=(0.5, 1.0), ncols=2)
    return ax


@styled
def allowances(table: pd.DataFrame, ax: Axes | None = None) -> Axes:
    """How many times its declared size each source may become, alone; 1 is as declared."""
    ax = axes(ax)
    headroom = np.asarray(table["headroom"], dtype=float)
    known = np.isfinite(headroom) & (headroom > 0.0)
    order = np.flatnonzero(known)[np.argsort(-headroom[known], kind="stable")]
    place = np.arange(len(order))
    ax.barh(place, headroom[order], left=0.0, color=COLOURS[0], height=0.6)
    ax.set_yticks(place, [one_line(str(table["source"].iloc[i]))[:40] for i in order])
    ax.axvline(1.0, color=INK, linestyle="--", label="as declared")
    ax.set_xscale("log")
    ax.xaxis.set_major_formatter("{x:g}")
    ax.set(xlabel="allowed over declared [1]")
    ax.grid(visible=False, axis="y")
    ax.legend(loc="best")
    return ax


@styled
def layouts(table: pd.DataFrame, ax: Axes | None = None) -> Axes:
    """Widest interval and worst true error over the target against the number of taps, by layout."""
    ax = axes(ax)
    for i, name in enumerate(("found", "root", "cosine")):
        rows = table[table["layout"] == name].sort_values("taps")
        look = {"color": COLOURS[i], "marker": MARKERS[i], "label": SPACED[name]}
        ax.semilogy(rows["taps"], rows["worst_ratio"], linestyle="-", **look)
        ax.semilogy(rows["taps"], rows["rms_error_ratio"], linestyle=":", **{**look, "label": None})
    ax.axhline(1.0, color=INK, linestyle="--", linewidth=0.9)
    ax.set(xlabel="taps [1]", ylabel="over its target [1]")
    ax.set_title("solid: widest interval; dotted: worst true rms error")
    ax.yaxis.set_major_formatter("{x:g}")
    ax.legend(loc="best")
    return ax


SPACED = {"found": "places found", "root": "√x spacing", "cosine": "cosine spacing"}


@styled
def wirings(table: pd.DataFrame, ax: Axes | None = None) -> Axes:
    """The widest interval over its target with each wiring; the one found is last."""
    ax = axes(ax)
    ratio, place = np.asarray(table["worst_ratio"], dtype=float), np.arange(len(table))[::-1]
    ax.barh(place, ratio, color=COLOURS[0], height=0.6)
    for y, value in zip(place, ratio, strict=True):
        ax.text(value, y, f"  {value:.4g}", va="center", color=INK)
    ax.set_yticks(place, [one_line(str(name)) for name in table["wiring"]])
    ax.set(
        xlabel="widest linearised interval over its target [1]",
        xlim=(0.0, 1.12 * max(1.0, float(ratio.max()))),
    )
    ax.grid(visible=False, axis="y")
    return ax


DRAWN: Mapping[str, Callable[..., Axes]] = {
    "frontier": frontier, "ranges": ranges, "allowances": allowances, "layouts": layouts, "wirings": wirings,
}  # fmt: skip


def plan_figure_jobs(tables: Mapping[str, pd.DataFrame], kind: str) -> dict[str, Callable[[Path], None]]:
    """What writes each figure of a plan, by its name in the folder."""
    return {
        f"figures/{name}.{kind}": partial(save, partial(_drawn, draw, tables[name]))
        for name, draw in DRAWN.items()
        if len(tables.get(name, ()))
    }


def _drawn(draw: Callable[..., Axes], table: pd.DataFrame) -> Figure:
    return figure_of(draw(table))
