"""Figures of a plan by matplotlib: cost against interval, ranges against full scale, allowances."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from tapband.files.write_text import one_line
from tapband.report.drawing import COLOURS, INK, axes, styled
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


DRAWN: Mapping[str, Callable[..., Axes]] = {"frontier": frontier, "ranges": ranges, "allowances": allowances}


def plan_figure_jobs(tables: Mapping[str, pd.DataFrame], kind: str) -> dict[str, Callable[[Path], None]]:
    """What writes each figure of a plan, by its name in the folder."""
    return {
        f"figures/{name}.{kind}": partial(save, partial(_drawn, draw, tables[name]))
        for name, draw in DRAWN.items()
        if len(tables.get(name, ()))
    }


def _drawn(draw: Callable[..., Axes], table: pd.DataFrame) -> Figure:
    return figure_of(draw(table))
