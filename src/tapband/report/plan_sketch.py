"""Figures of a plan as SVG that stands without any script: cost against interval, and ranges against full scale."""

from __future__ import annotations

from collections.abc import Sequence
from math import isfinite
from typing import TYPE_CHECKING

import numpy as np
from markupsafe import Markup, escape

from tapband.report.sketch import Scale

if TYPE_CHECKING:
    import pandas as pd

WIDTH, LEFT, RIGHT = 640, 64, 628
SPACED = {"found": "found", "root": "√x", "cosine": "cosine"}
FAR = 4.0
"""Ratio past which a layout is no candidate."""
LABELS = 28
"""Most taps whose names fit below the figure."""


def frontier_sketch(frame: pd.DataFrame) -> Markup:
    """Cost of every efficient set against its widest interval over the target; below 1 all targets are met."""
    cost, ratio = (np.asarray(frame[c], dtype=float) for c in ("cost", "worst_ratio"))
    top, bottom = 30, 230
    x, y = Scale(cost.tolist(), LEFT, RIGHT, 6), Scale([*ratio.tolist(), 1.0], bottom, top, 4)
    order = np.argsort(cost)
    steps = "".join(
        f"{'M' if i == 0 else 'H'}{x(cost[k]):.1f} {'' if i == 0 else 'V'}{y(ratio[k]):.1f}"
        for i, k in enumerate(order)
    )
    marks = "".join(_dot(x(c), y(r), 4) for c, r in zip(cost, ratio, strict=True))
    body = (
        f'<path class="target" d="M{LEFT} {y(1.0):.1f}H{RIGHT}"/>'
        f'<g class="s0"><path class="line" d="{steps}"/><path class="mark" d="{marks}"/></g>'
    )
    names = ("cost", "widest interval over its target; dashed: met")
    return _framed(270, (top, bottom), x, y, names, "Cost against interval, every efficient set", body)


def ranges_sketch(frame: pd.DataFrame) -> Markup:
    """What each tap will see [kPa], a bar a channel in table order, with its full scale on either side."""
    known = np.isfinite(np.asarray(frame["full_scale"], dtype=float))
    frame = frame.loc[known] if known.any() else frame  # a barometer beside gauges would flatten them
    low, high, full = (np.asarray(frame[c], dtype=float) / 1e3 for c in ("lowest", "highest", "full_scale"))
    names = [str(name) for name in frame["tap"].astype(object)]
    top, bottom = 30, 230
    ends = [v for v in [*low, *high, *full, *-full] if isfinite(v)]
    x, y = Scale([0.0, float(len(names) - 1)], LEFT, RIGHT, 1), Scale(ends, bottom, top, 5)
    step = (RIGHT - LEFT) / max(len(names), 1)
    bars = "".join(f"M{x(i):.1f} {y(a):.1f}V{y(b):.1f}" for i, (a, b) in _known(low, high))
    scales = "".join(
        f"M{x(i) - step / 2:.1f} {y(sign * f):.1f}h{step:.1f}"
        for sign in (1, -1)
        for i, f in enumerate(full)
        if isfinite(f)
    )
    body = f'<path class="target" d="{scales}"/><g class="s0"><path class="heavy" d="{bars}"/></g>' + _names(
        names, x, bottom
    )
    said = ("tap", "pressure [kPa]; dashed: full scale")
    return _framed(290, (top, bottom), None, y, said, "What each tap will see against its full scale", body)


def layouts_sketch(frame: pd.DataFrame) -> Markup:
    """Widest interval over its target against the number of taps: as found, √x and cosine; far misses left out."""
    top, bottom = 30, 230
    rows = frame[frame["layout"].isin(SPACED) & (np.asarray(frame["worst_ratio"], dtype=float) <= FAR)]
    taps, ratio = (np.asarray(rows[c], dtype=float) for c in ("taps", "worst_ratio"))
    x, y = Scale(taps.tolist(), LEFT, RIGHT, 6), Scale([*ratio.tolist(), 0.0, 1.0], bottom, top, 5)
    body = f'<path class="target" d="M{LEFT} {y(1.0):.1f}H{RIGHT}"/>'
    for i, (name, label) in enumerate(SPACED.items()):
        own = rows[rows["layout"] == name].sort_values("taps")
        places = [(x(float(n)), y(float(r))) for n, r in zip(own["taps"], own["worst_ratio"], strict=True)]
        line = "".join(f"{'ML'[k > 0]}{a:.1f} {b:.1f}" for k, (a, b) in enumerate(places))
        marks = "".join(_dot(a, b, 3.5) for a, b in places)
        body += f'<g class="s{i}"><path class="line" d="{line}"/><path class="mark" d="{marks}"/></g>'
        if places:
            a, b = places[0]
            body += f'<text class="axis" x="{a + 8:.1f}" y="{b - 4:.1f}">{escape(label)}</text>'
    names = ("taps", f"widest interval over its target; dashed: met; above {FAR:g} left out")
    return _framed(270, (top, bottom), x, y, names, "Widest interval against the number of taps", body)


def _known(low: np.ndarray, high: np.ndarray) -> list[tuple[int, tuple[float, float]]]:
    return [
        (i, (a, b)) for i, (a, b) in enumerate(zip(low, high, strict=True)) if isfinite(a) and isfinite(b)
    ]


def _names(names: Sequence[str], x: Scale, bottom: int) -> str:
    every = -(-len(names) // LABELS)
    shown = "".join(
        f'<text transform="translate({x(i) + 4:.1f} {bottom + 10}) rotate(-90)" text-anchor="end">'
        f"{escape(name[:6])}</text>"
        for i, name in enumerate(names)
        if i % every == 0
    )
    return f'<g class="ticks">{shown}</g>'


def _dot(x: float, y: float, r: float) -> str:
    return f"M{x - r:.1f} {y:.1f}a{r} {r} 0 1 0 {2 * r} 0a{r} {r} 0 1 0 {-2 * r} 0"


def _framed(
    height: int,
    ends: tuple[int, int],
    x: Scale | None,
    y: Scale,
    names: tuple[str, str],
    title: str,
    body: str,
) -> Markup:
    top, bottom = ends
    grid = "".join(f'<line x1="{LEFT}" x2="{RIGHT}" y1="{y(v):.1f}" y2="{y(v):.1f}"/>' for v in y.ticks)
    words = [
        f'<text x="{LEFT - 6}" y="{y(v) + 4:.1f}" text-anchor="end">{y.label(v)}</text>' for v in y.ticks
    ]
    if x is not None:
        words += [
            f'<text x="{x(v):.1f}" y="{bottom + 16}" text-anchor="middle">{x.label(v)}</text>'
            for v in x.ticks
        ]
    frame = f'<path class="frame" d="M{LEFT} {top}V{bottom}H{RIGHT}"/>'
    return Markup(  # every part is a number, or escaped
        f'<svg viewBox="0 0 {WIDTH} {height}" width="{WIDTH}" height="{height}" role="img">'
        f'<title>{escape(title)}</title><g class="grid">{grid}{frame}</g><g class="ticks">{"".join(words)}</g>'
        f'<text class="axis" x="2" y="{top - 12}">{escape(names[1])}</text>'
        f'<text class="axis" x="{RIGHT}" y="{height - 4}" text-anchor="end">{escape(names[0])}</text>{body}</svg>'
    )
