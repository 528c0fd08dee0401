"""Sections of the report that exist only where their tables do: questions between points, and planning.

What each table shows is a list of columns; every further column stays in its file.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from tapband.files.write_columns import cells
from tapband.report.rounding import MISSING, decimals, fixed, significant

if TYPE_CHECKING:
    import pandas as pd

    from tapband.files.write_columns import Cell

MOST_ROWS = 200
"""Rows shown of one table; the file has all."""

Row = Mapping[str, "Cell"]
Write = Callable[[Row], str]


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """A column: its heading, what it needs, how a row writes it, and whether it is a number."""

    head: str
    needs: tuple[str, ...]
    write: Write
    number: bool = True


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """A table ready to print: headings (text, is a number), rows, and what was left out."""

    name: str
    title: str
    note: str
    heads: tuple[tuple[str, bool], ...]
    rows: tuple[tuple[str, ...], ...]
    left: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Part:
    """A section of tables."""

    id: str
    title: str
    tables: tuple[Table, ...]


def _number(cell: Cell) -> float:
    return float(cell) if isinstance(cell, int | float) else float("nan")


def text(column: str, head: str = "") -> Column:
    """The cell as it stands."""
    return Column(
        head=head or column.replace("_", " "), needs=(column,), number=False,
        write=lambda row: "" if row[column] is None else str(row[column]),
    )  # fmt: skip


def number(column: str, head: str = "", digits: int = 3) -> Column:
    """The cell to so many significant digits."""
    return Column(
        head=head or column.replace("_", " "), needs=(column,),
        write=lambda row: str(row[column]) if isinstance(row[column], int | str)
        else significant(_number(row[column]), digits),
    )  # fmt: skip


def amount(column: str) -> Column:
    """The number as people write a sum."""
    return Column(
        head=column, needs=(column,),
        write=lambda row: f"{_number(row[column]):.10g}" if row[column] is not None else MISSING,
    )  # fmt: skip


def angle(column: str, head: str) -> Column:
    """An angle to hundredths of a degree."""
    return Column(head=head, needs=(column,), write=lambda row: fixed(_number(row[column]), 2))


def percent(column: str, head: str) -> Column:
    """A fraction as per cent."""
    return Column(head=head, needs=(column,), write=lambda row: _percent(_number(row[column])))


def _percent(value: float) -> str:
    return MISSING if value != value else f"{100 * value:.1f} %"


def interval(value: str, half: str = "U", head: str = "") -> Column:
    """Value ± half-width; where ``agrees`` says no, value and the ends by Monte Carlo."""

    def write(row: Row) -> str:
        v, u = _number(row[value]), _number(row[half])
        if row.get("agrees") == "no" and row.get("mc_low") is not None:
            low, high = _number(row["mc_low"]), _number(row["mc_high"])
            d = decimals(0.5 * (high - low))
            return f"{fixed(v, d)} ({fixed(low, d)} … {fixed(high, d)})*"
        d = decimals(u)
        return f"{fixed(v, d)} ± {fixed(u, d)}" if u == u else fixed(v, 4)

    return Column(head=head or value, needs=(value, half), write=write)


def between(low: str, high: str, head: str) -> Column:
    """Two ends."""
    return Column(
        head=head, needs=(low, high),
        write=lambda row: f"{significant(_number(row[low]))} … {significant(_number(row[high]))}",
    )  # fmt: skip


def with_unit(column: str, head: str) -> Column:
    """A number and the unit of its row."""

    def write(row: Row) -> str:
        unit = row.get("unit")
        value = row[column] if isinstance(row[column], str) else significant(_number(row[column]))
        return f"{value} {unit}" if isinstance(unit, str) and unit != "1" and value != MISSING else str(value)

    return Column(head=head, needs=(column,), write=write)


def parts_of(
    tables: Mapping[str, pd.DataFrame], layout: Mapping[str, tuple[str, tuple[str, ...]]],
    shown: Mapping[str, tuple[str, str, Sequence[Column]]],
) -> tuple[Part, ...]:  # fmt: skip
    """The sections of ``layout`` whose tables exist and have rows, each table as ``shown`` says."""
    found = []
    for id_, (title, names) in layout.items():
        here = tuple(
            table_of(name, tables[name], *shown[name]) for name in names if len(tables.get(name, ()))
        )
        if here:
            found.append(Part(id=id_, title=title, tables=here))
    return tuple(found)


def table_of(name: str, frame: pd.DataFrame, title: str, note: str, columns: Sequence[Column] = ()) -> Table:
    """The table with the columns it has of those wanted; without any, all of its columns as text."""
    flat = frame.reset_index() if any(level is not None for level in frame.index.names) else frame
    wanted = [c for c in columns if all(n in flat.columns for n in c.needs)]
    if not wanted:
        wanted = [(number if flat[c].dtype.kind in "fiu" else text)(str(c)) for c in flat.columns]
    raw = {str(c): cells(flat[c].iloc[:MOST_ROWS]) for c in flat.columns}
    names = list(raw)
    rows = [dict(zip(names, values, strict=True)) for values in zip(*raw.values(), strict=True)]
    written = [[c.write(row) for row in rows] for c in wanted]
    kept = [i for i, cells_ in enumerate(written) if wanted[i].number or any(cells_)]  # no column of blanks
    left = len(flat) - MOST_ROWS
    return Table(
        name=name, title=title, note=note, heads=tuple((wanted[i].head, wanted[i].number) for i in kept),
        rows=tuple(zip(*(written[i] for i in kept), strict=True)),
        left=f"{left} more rows in {name}.csv" if left > 0 else "",
    )  # fmt: skip
