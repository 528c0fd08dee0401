"""The one style of our figures."""

from __future__ import annotations

from collections.abc import Callable
from functools import wraps
from typing import TYPE_CHECKING, Any, ParamSpec

if TYPE_CHECKING:
    from matplotlib.axes import Axes

P = ParamSpec("P")

COLOURS = ("#0072b2", "#c24e00", "#00775a", "#8f4a78", "#7a6000", "#45525c")
"""After Okabe and Ito, Color Universal Design (2008), darkened to stand out from paper by 4.5 to 1."""
MARKERS = ("o", "s", "^", "D")
DASHES = ("-", (0, (6, 3)), (0, (2, 2)), (0, (8, 3, 2, 3)), (0, (10, 4)), (0, (1, 3)))
INK, SOFT, LINE = "#1f2428", "#5a6268", "#d9d6cc"
WIDTH, HEIGHT = 6.4, 4.2
"""[in]"""

STYLE: dict[Any, Any] = {
    "font.family": ["DejaVu Sans"], "font.size": 9.5, "text.color": INK, "text.parse_math": False,
    "axes.edgecolor": SOFT, "axes.labelcolor": INK, "axes.titlesize": 9.5, "axes.titlelocation": "left",
    "axes.titlecolor": SOFT, "axes.spines.top": False, "axes.spines.right": False, "axes.grid": True,
    "axes.axisbelow": True, "axes.unicode_minus": True, "grid.color": LINE, "grid.linewidth": 0.7,
    "xtick.color": SOFT, "ytick.color": SOFT, "lines.linewidth": 1.2, "lines.markersize": 4.5,
    "legend.frameon": False, "legend.fontsize": 9, "errorbar.capsize": 2.5,
    "svg.fonttype": "none", "svg.hashsalt": "tapband", "pdf.fonttype": 42,
    "figure.figsize": (WIDTH, HEIGHT), "figure.dpi": 100, "savefig.dpi": 200,
    "figure.constrained_layout.use": True,
}  # fmt: skip
"""Names are text, never mathematics: a dollar sign in one must not be set as a formula."""


def look(i: int) -> dict[str, Any]:
    """Colour, marker and line style of series ``i``."""
    return {"color": COLOURS[i % 6], "marker": MARKERS[i % 4], "linestyle": DASHES[i % 6]}


def styled(draw: Callable[P, Axes]) -> Callable[P, Axes]:
    """The drawing function under the style, which ends with it."""

    @wraps(draw)
    def under_style(*args: P.args, **kwargs: P.kwargs) -> Axes:
        from matplotlib import rc_context

        with rc_context(STYLE):
            return draw(*args, **kwargs)

    return under_style


def axes(ax: Axes | None) -> Axes:
    """The axes given, or those of a new figure that no window holds."""
    if ax is not None:
        return ax
    from matplotlib.figure import Figure

    return Figure().add_subplot()
