"""Tables that go in: a header of names with units, then blocks of rows, whatever the file's kind."""

from __future__ import annotations

import re
from collections.abc import Callable, Collection, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from tapband.files.campaign_text import is_readable, note_system
from tapband.files.faults import Findings, RuleError, nearest, shown
from tapband.files.units import EXAMPLE, NUMBER, Unit, UnknownUnitError, unit

Array = NDArray[np.float64]
MISSING = frozenset({"", "NA", "NaN", "nan", "#N/A"})
"""Cells that mean a missing value."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """A column: its name, the unit text behind it (empty: none), its position."""

    name: str
    unit: str
    index: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Block:
    """Consecutive rows: their place in the file, numbers (R, k) with NaN where missing, texts by column.

    ``refused`` (R, k) are cells whose fault is noted already, None where there is none.
    """

    lines: NDArray[np.int64]
    numbers: Array
    texts: tuple[Sequence[str], ...]
    refused: NDArray[np.bool_] | None = None

    def empty(self, column: int) -> NDArray[np.bool_]:
        """Rows (R,) in which nothing stands in a number column."""
        empty = np.isnan(self.numbers[:, column])
        return empty if self.refused is None else empty & ~self.refused[:, column]


_STREAM = ("p_total", "p_static", "p_difference", "q", "mach", "t_total")
_PLACES = ("x", "y", "s", "surface", "full_scale")
STANDARD = frozenset(
    ("point", "run", "config", "alpha", *_STREAM, "nominal_alpha", "nominal_mach", *_PLACES, "tap", "module")
)
"""Column names with a meaning of their own: none of them is offered as a misspelling of another."""


class BrokenTableError(Exception):
    """A table whose rows cannot be read to the end; its fault is noted already."""


Blocks = Callable[[Sequence[int], Sequence[int], Findings], Iterator[Block]]
"""Blocks of the columns asked for as numbers and as texts; what is no number is noted.

Raises :class:`BrokenTableError`, its fault noted, where the file breaks off.
"""


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """A table whose header is read. ``row_word`` is what a place in it is called: line or row."""

    file: str
    columns: tuple[Column, ...]
    row_word: str
    blocks: Blocks

    @property
    def names(self) -> tuple[str, ...]:
        """Column names in order."""
        return tuple(column.name for column in self.columns)

    def column(self, name: str) -> Column | None:
        """The column of this name, None where there is none."""
        return next((column for column in self.columns if column.name == name), None)

    def at(self, line: int, column: str = "") -> str:
        """Where a cell stands, for a message."""
        return f"{self.file}, {self.row_word} {line}" + (f", column {column}" if column else "")

    def of(self, column: str) -> str:
        """Where a column stands, for a message."""
        return f"{self.file}, column {column}"


def open_table(path: Path, name: str, findings: Findings, where: str) -> Table | None:
    """The table of a file by the ending of its name, None where it cannot be read; faults are noted.

    ``where`` is the place in the campaign file that names it.
    """
    if not is_readable(path, name, findings, where):
        return None
    kind = path.suffix.lower()
    if kind in _MAGIC and not _begins(path, name, *_MAGIC[kind], findings):
        return None
    if kind == ".xlsx":
        from tapband.files.excel_table import open_excel

        return open_excel(path, name, findings)
    if kind == ".parquet":
        from tapband.files.parquet_table import open_parquet

        return open_parquet(path, name, findings)
    if kind in {".xls", ".xlsm", ".ods"}:
        findings.add(name, "must be .csv, .xlsx or .parquet", shown(kind), "save it as .xlsx or .csv")
        return None
    from tapband.files.csv_table import open_csv

    return open_csv(path, name, findings)


_MAGIC = {".xlsx": (b"PK", "a workbook"), ".parquet": (b"PAR1", "a Parquet file")}


def _begins(path: Path, name: str, magic: bytes, kind: str, findings: Findings) -> bool:
    """Whether a file begins as its kind does; else, or where it cannot be read, the fault is noted."""
    try:
        with path.open("rb") as file:
            begins = file.read(len(magic)) == magic
    except OSError as error:
        note_system(error, name, findings)
        return False
    if not begins:
        findings.add(
            name, f"must be {kind}", "something else by its first bytes", "correct the ending of its name"
        )
    return begins


_HEAD = re.compile(r"([^\[\]]*?)\s*(?:\[\s*([^\[\]]*?)\s*\])?")


def read_header(cells: Sequence[str], file: str, place: str, findings: Findings) -> tuple[Column, ...] | None:
    """Columns of a header row, None where no table can be read by it. Unnamed columns are left out."""
    columns, sound = [], True
    if cells and all(re.fullmatch(r"\s*[+-]?[\d.]+([eE][+-]?\d+)?\s*", cell) for cell in cells if cell):
        findings.add(place, "must name the columns", shown(cells[0]), "write the names in the first row")
        return None
    for index, cell in enumerate(cells):
        text = cell.strip()
        if not text:
            if any(later.strip() for later in cells[index + 1 :]):
                findings.warn(f"{place}: column {index + 1} has no name and is not read")
            continue
        match = _HEAD.fullmatch(text)
        if match is None or not match[1]:
            findings.add(
                place,
                "must be a name, then its unit in square brackets",
                shown(text),
                'write for example "U07 [Pa]"',
            )
            sound = False
            continue
        columns.append(Column(name=match[1], unit=match[2] or "", index=index))
    if not sound:
        return None
    if not columns:
        findings.add(place, "must name the columns", "an empty row", "write the names in the first row")
        return None
    seen: dict[str, int] = {}
    for column in columns:
        if column.name in seen:
            findings.add(
                f"{file}, column {column.name}", "is there twice",
                f"columns {seen[column.name] + 1} and {column.index + 1}", "rename or remove one",
            )  # fmt: skip
        seen.setdefault(column.name, column.index)
    return tuple(column for column in columns if seen[column.name] == column.index)


def need(
    table: Table, name: str, findings: Findings, why: str = "", taken: Collection[str] = STANDARD
) -> Column | None:
    """The column of this name; its absence is noted, with the nearest name that is not ``taken``."""
    found = table.column(name)
    if found is None:
        near = nearest(name, [other for other in table.names if other not in taken])
        do = f"rename column {near} or add {name}" if near else f"add the column {name}"
        findings.add(
            table.file, f"needs the column {name}" + (f" ({why})" if why else ""), "none of that name", do
        )
    return found


def column_unit(table: Table, column: Column, dimension: str, findings: Findings, kind: str = "") -> Unit:
    """The unit of a column of one dimension; the plain one (factor 1) with a fault noted where it is wrong.

    Faults of one ``kind`` of columns are listed up to a few.
    """
    plain = Unit(dimension, 1.0)
    with findings.at(table.of(column.name), kind=kind):
        if dimension == NUMBER:
            if column.unit not in {"", "-", "1"}:
                raise RuleError(
                    "takes no unit", shown(f"{column.name} [{column.unit}]"), f'write "{column.name}"'
                )
            return plain
        sample = f'write "{column.name} [{EXAMPLE[dimension]}]"'
        if not column.unit:
            raise RuleError("needs a unit", shown(column.name), sample)
        try:
            found = unit(column.unit)
        except UnknownUnitError as error:
            raise RuleError(error.rule, error.got, sample) from None
        if found.dimension != dimension:
            article = "an" if dimension[0] in "aeiou" else "a"
            raise RuleError(f"must be {article} {dimension}", shown(f"{column.name} [{column.unit}]"), sample)
        return found
    return plain
