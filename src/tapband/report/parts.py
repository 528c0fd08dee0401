"""Sections of the report that exist only where their tables do: questions between points, and planning."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

from tapband.files.write_columns import cells, ordered, units_of
from tapband.report.rounding import significant

if TYPE_CHECKING:
    import pandas as pd

    from tapband.files.write_columns import Cell

MOST_ROWS = 400
"""Rows shown of one table; the file has all."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """A column's heading."""

    name: str
    unit: str
    number: bool


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """A table ready to print."""

    title: str
    note: str
    columns: tuple[Column, ...]
    rows: tuple[tuple[str, ...], ...]
    left: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Part:
    """A section of tables."""

    id: str
    title: str
    tables: tuple[Table, ...]


SECTIONS: Mapping[str, tuple[str, tuple[str, ...]]] = {
    "decisions": ("Decisions", ("decisions",)),
    "between": ("Between points", ("differences", "fits", "repeats", "regions")),
    "rankings": ("Rankings", ("ranking",)),
    "planning": (
        "Before the test",
        ("ranges", "allowances", "selection", "frontier", "wiring", "layout"),
    ),
}
TITLES: Mapping[str, tuple[str, str]] = {
    "decisions": (
        "Limits on the measured value",
        "Probability that the value lies within its limits, and the answer by the guard band (JCGM 106).",
    ),
    "differences": (
        "Differences",
        "What the two sides share cancels; u_if_independent is what it would be if nothing did.",
    ),
    "fits": (
        "Polar fits",
        "Weighted by the random part alone, so that shared errors do not bias a slope; covariance in full.",
    ),
    "repeats": (
        "Repeats",
        "Scatter of repeated points against the sources that change between them, and no others.",
    ),
    "regions": ("Joint regions", "Ellipses that hold two coefficients together (JCGM 102)."),
    "ranking": (
        "Groups of sources",
        "Linear shares beside Sobol' indices; where they differ, products or curvature are at work.",
    ),
    "ranges": ("Ranges", "What each tap will see, with the margin asked for, against its full scale."),
    "allowances": (
        "Allowances",
        "The largest standard uncertainty of a source, all others as declared, that meets every target.",
    ),
    "selection": ("Selection", "The cheapest set of options that meets every target at every point."),
    "frontier": ("Cost against interval", "Every set that no cheaper one beats."),
    "wiring": ("Wiring", "The assignment of taps to modules with the smallest widest interval."),
    "layout": ("Tap layout", "Positions found for the number of taps asked for."),
}


def parts_of(tables: Mapping[str, pd.DataFrame]) -> tuple[Part, ...]:
    """The sections whose tables exist and have rows."""
    found = []
    for id_, (title, names) in SECTIONS.items():
        shown = tuple(_table(name, tables[name]) for name in names if name in tables and len(tables[name]))
        if shown:
            found.append(Part(id=id_, title=title, tables=shown))
    return tuple(found)


def _table(name: str, frame: pd.DataFrame) -> Table:
    table = ordered(name, frame)
    units = units_of(name, table)
    numbers = {str(c): table[c].dtype.kind in "fiu" for c in table.columns}
    head = tuple(
        Column(name=c, unit=units[c] if units[c] not in ("", "1", "by row") else "", number=numbers[c])
        for c in numbers
    )
    columns = [[_shown(v) for v in cells(table[c].iloc[:MOST_ROWS])] for c in table.columns]
    left = len(table) - MOST_ROWS
    title, note = TITLES[name]
    return Table(
        title=title, note=note, columns=head, rows=tuple(zip(*columns, strict=True)),
        left=f"{left} more rows in {name}.csv" if left > 0 else "",
    )  # fmt: skip


def _shown(cell: Cell) -> str:
    if cell is None:
        return ""
    if isinstance(cell, bool):
        return "yes" if cell else "no"
    if isinstance(cell, int):
        return str(cell)
    return significant(cell, 4) if isinstance(cell, float) else cell
