"""The figures of the studies: small vector files, the same picture always the same file."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from matplotlib.axes import Axes

COLOURS = ("#1b5e8c", "#b5651d", "#4d7c3a", "#7a3b6e")
MARKERS = ("o", "s", "^", "D")
LINES = ("-", "--", "-.", ":")
"""Series differ in colour, marker and line, so that they stay apart in grey."""


def look(i: int) -> dict[str, object]:
    """Colour, marker and line of series ``i``."""
    return {"color": COLOURS[i % 4], "marker": MARKERS[i % 4], "linestyle": LINES[i % 4], "markersize": 4.5}


@contextmanager
def drawn(path: Path, columns: int = 1, width: float = 7.0, height: float = 3.3) -> Iterator[list[Axes]]:
    """Axes side by side, saved as SVG at the end: text as text, fixed names, no date."""
    from matplotlib import rc_context
    from matplotlib.backends.backend_svg import FigureCanvasSVG
    from matplotlib.figure import Figure

    style = {"svg.hashsalt": path.stem, "svg.fonttype": "none", "font.size": 9, "legend.fontsize": 8}
    with rc_context(style):
        figure = Figure(figsize=(width, height), layout="constrained")
        FigureCanvasSVG(figure)
        axes = figure.subplots(1, columns, squeeze=False)[0]
        for ax in axes:
            ax.grid(color="0.9")
            ax.set_axisbelow(True)
        yield list(axes)
        figure.savefig(path, metadata={"Date": None})
