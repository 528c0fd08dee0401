"""Every figure as a file: of each coefficient its polar, drivers and shares; of each point its pressures."""

from __future__ import annotations

import re
import warnings
from collections.abc import Callable, Iterator
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from tapband.report.drawing import HEIGHT, STYLE, WIDTH
from tapband.report.headline import coefficients_of, headline, keys
from tapband.report.summary import MAIN

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from tapband.report.publish import Outcome

KINDS = ("svg", "png", "pdf")
Maker = Callable[[], "Figure"]


def figure_jobs(results: Outcome, kind: str) -> dict[str, Callable[[Path], None]]:
    """What writes each figure, by its name in the folder."""
    return {f"figures/{name}.{kind}": partial(save, make) for name, make in _figures(results)}


def _figures(results: Outcome) -> Iterator[tuple[str, Maker]]:
    from tapband.report import figures

    frame = results.tables["coefficients"]
    budget = len(results.tables.get("budget", ())) > 0
    for name in coefficients_of(frame):
        yield f"{name}-against-angle", partial(_polar, results, name)
        if budget:
            yield f"{name}-drivers", partial(_single, figures.contributors, results, name)
            yield f"{name}-shares", partial(_single, figures.shares, results, name)
    yield from _rankings(results)
    for i, key in enumerate(keys(frame), start=1):
        yield f"cp-{i:04d}-{_safe(key)}", partial(_pressure, results, key)


def _rankings(results: Outcome) -> Iterator[tuple[str, Maker]]:
    """The driver of each point, and of each main coefficient what taps and groups do where it is widest."""
    from tapband.report import figures_rank
    from tapband.report.figure_wiring import wiring

    frame, labels = results.tables["coefficients"], keys(results.tables["coefficients"])
    drawings = (
        ("groups", "ranking", figures_rank.groups),
        ("taps-on-section", "tap_ranking", figures_rank.taps_on_section),
        ("taps-along-chord", "tap_ranking", figures_rank.taps_along_chord),
        ("wiring", "wiring_comparison", wiring),
    )
    for name in (name for name in MAIN if name in coefficients_of(frame)):
        half = headline(frame, name).half
        if not np.isfinite(half).any():
            continue
        widest = labels[int(np.nanargmax(half))]
        for title, table, draw in drawings:
            if len(results.tables.get(table, ())):
                yield f"{name}-{title}", partial(_at_point, draw, results, name, widest)


def _at_point(draw: Callable[..., Axes], results: Outcome, name: str, point: str) -> Figure:
    return figure_of(draw(results, name, point))


def figure_of(ax: Axes) -> Figure:
    """The figure that holds the axes."""
    figure = ax.get_figure(root=True)
    if figure is None:
        raise AssertionError("axes without a figure")
    return figure


def _polar(results: Outcome, name: str) -> Figure:
    from tapband.report import figures

    figure, above, below = _stacked()
    figures.coefficient(results, name, ax=above)
    figures.half_width(results, name, ax=below)
    above.set_xlabel("")
    _series_once(above, below)
    return figure


def _pressure(results: Outcome, key: str) -> Figure:
    from tapband.report import figures

    figure, above, below = _stacked()
    figures.pressure(results, key, ax=above)
    figures.pressure_half_width(results, key, ax=below)
    above.set_xlabel("")
    return figure


def _stacked() -> tuple[Figure, Axes, Axes]:
    from matplotlib import rc_context
    from matplotlib.figure import Figure

    with rc_context(STYLE):
        figure = Figure(figsize=(WIDTH, 1.45 * HEIGHT))
        above, below = figure.subplots(2, 1, sharex=True, height_ratios=(2, 1))
    return figure, above, below


def _series_once(above: Axes, below: Axes) -> None:
    """Leave in the lower legend only what the upper one does not name; the series are the same."""
    from matplotlib import rc_context

    named = set(above.get_legend_handles_labels()[1])
    handles, labels = below.get_legend_handles_labels()
    rest = {label: handle for handle, label in zip(handles, labels, strict=True) if label not in named}
    if (old := below.get_legend()) is not None:
        old.remove()
    if rest:
        with rc_context(STYLE):
            below.legend(list(rest.values()), list(rest), loc="best")


def _single(draw: Callable[..., object], results: Outcome, name: str) -> Figure:
    from matplotlib import rc_context
    from matplotlib.figure import Figure

    with rc_context(STYLE):
        figure = Figure()
        draw(results, name, ax=figure.add_subplot())
    return figure


def save(make: Maker, path: Path) -> None:
    """Draw one figure into a file of the kind its name ends with; the same figure is the same bytes."""
    from matplotlib import rc_context

    with warnings.catch_warnings(), rc_context(STYLE):
        # A name in a script that the font lacks shows boxes; the tables hold it as it is.
        warnings.filterwarnings("ignore", message="Glyph .* missing from")
        figure = make()
        stamp = {"svg": {"Date": None}, "pdf": {"CreationDate": None}}.get(path.suffix[1:])
        figure.savefig(path, metadata=stamp)


def _safe(name: str) -> str:
    """The name with what a file name may not hold left out."""
    return re.sub(r"[^A-Za-z0-9.-]+", "-", name).strip("-.")[:40] or "point"
