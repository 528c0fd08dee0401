"""The figure of coefficients against angle as SVG that stands without any script."""

from __future__ import annotations

from collections.abc import Sequence
from math import ceil, floor, isfinite, log10
from typing import TYPE_CHECKING

import numpy as np
from markupsafe import Markup, escape

from tapband.report.headline import headline
from tapband.report.rounding import fixed

if TYPE_CHECKING:
    import pandas as pd

WIDTH, HEIGHT = 300, 250
LEFT, RIGHT, TOP, BOTTOM = 58, 290, 26, 206


class Scale:
    """Maps a range, a little widened, onto pixels; ticks at whole steps inside."""

    def __init__(self, values: Sequence[float], start: float, end: float, count: int) -> None:
        known = [v for v in values if isfinite(v)] or [0.0, 1.0]
        low, high = min(known), max(known)
        if low == high:
            low, high = low - 0.5 * (abs(low) or 1.0), high + 0.5 * (abs(high) or 1.0)
        raw = (high - low) / count
        power = 10.0 ** floor(log10(raw))
        self.step = power * next(f for f in (1, 2, 5, 10) if raw / power <= f)
        self._low, self._span = low - 0.045 * (high - low), 1.09 * (high - low)
        first, last = ceil(self._low / self.step - 1e-9), floor((self._low + self._span) / self.step + 1e-9)
        self.ticks = [i * self.step for i in range(first, last + 1)]
        self._start, self._end = start, end

    def __call__(self, value: float) -> float:
        """Pixel of a value."""
        return self._start + (value - self._low) / self._span * (self._end - self._start)

    def label(self, value: float) -> str:
        """A tick in words."""
        return fixed(value, max(0, -floor(log10(self.step) + 1e-9)))


def polar_sketch(frame: pd.DataFrame, coefficient: str, percent: str) -> Markup:
    """Estimates and headline intervals of one coefficient against angle."""
    shown = headline(frame, coefficient)
    alpha = np.asarray(frame["alpha"], dtype=float)
    x = Scale(alpha.tolist(), LEFT, RIGHT, 5)
    y = Scale([*shown.low, *shown.high, *shown.estimate], BOTTOM, TOP, 5)
    marks = [
        f"M{x(a):.2f} {y(low):.2f}V{y(high):.2f}M{x(a) - 3:.2f} {y(v):.2f}a3 3 0 1 0 6 0a3 3 0 1 0 -6 0"
        for a, v, low, high in zip(alpha, shown.estimate, shown.low, shown.high, strict=True)
        if isfinite(low) and isfinite(high)
    ]
    name = f"{coefficient} against angle: {len(marks)} points with {percent} coverage intervals"
    return Markup(  # every part is a number, or escaped
        f'<svg viewBox="0 0 {WIDTH} {HEIGHT}" width="{WIDTH}" height="{HEIGHT}" role="img">'
        f"<title>{escape(name)}</title>{_axes(x, y, coefficient)}"
        f'<g class="s0"><path class="bars" d="{"".join(marks)}"/></g></svg>'
    )


def _axes(x: Scale, y: Scale, name: str) -> str:
    lines = [f'<line x1="{LEFT}" x2="{RIGHT}" y1="{y(v):.2f}" y2="{y(v):.2f}"/>' for v in y.ticks]
    lines += [
        f'<line class="faint" x1="{x(v):.2f}" x2="{x(v):.2f}" y1="{TOP}" y2="{BOTTOM}"/>' for v in x.ticks
    ]
    words = [
        f'<text x="{LEFT - 6}" y="{y(v) + 4:.2f}" text-anchor="end">{y.label(v)}</text>' for v in y.ticks
    ]
    words += [
        f'<text x="{x(v):.2f}" y="{BOTTOM + 16}" text-anchor="middle">{x.label(v)}</text>' for v in x.ticks
    ]
    return (
        f'<g class="grid">{"".join(lines)}</g><g class="ticks">{"".join(words)}</g>'
        f'<text class="axis" x="2" y="{TOP - 10}">{escape(name)}</text>'
        f'<text class="axis" x="{RIGHT}" y="{BOTTOM + 32}" text-anchor="end">angle of attack [deg]</text>'
    )
