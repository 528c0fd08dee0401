"""One workbook: a sheet a table, units under the names, numbers as numbers, text that stays text."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from tapband.files.write_columns import Cell, cells, ordered, units_of
from tapband.files.write_json import plain
from tapband.files.write_text import one_line
from tapband.nouns.errors import QuestionError

if TYPE_CHECKING:
    import pandas as pd
    from openpyxl import Workbook
    from openpyxl.worksheet._write_only import WriteOnlyWorksheet

ROWS = 1_000_000
"""Rows of a sheet, below the format's limit of 1,048,576; longer tables go on in a further sheet."""
TEXT = 32_767
"""Characters of a cell, the format's limit."""


def write_excel(path: Path, tables: Mapping[str, pd.DataFrame], meta: Mapping[str, object]) -> None:
    """Write the workbook: sheet ``notes`` first, then a sheet a table."""
    try:
        from openpyxl import Workbook
    except ImportError as error:
        raise QuestionError(
            "--excel: needs the package openpyxl; got none; install tapband[excel]"
        ) from error
    book = Workbook(write_only=True)
    _notes(book, meta)
    for name, frame in tables.items():
        table = ordered(name, frame)
        for part, start in enumerate(range(0, max(len(table), 1), ROWS), start=1):
            _sheet(book, name if part == 1 else f"{name} ({part})", name, table.iloc[start : start + ROWS])
    book.save(path)


def _sheet(book: Workbook, title: str, name: str, table: pd.DataFrame) -> None:
    columns = [cells(table[column]) for column in table.columns]
    names, units = [str(c) for c in table.columns], units_of(name, table)
    sheet = book.create_sheet(title)
    sheet.freeze_panes = "B3"
    _widths(sheet, [_width(n, units[n], values) for n, values in zip(names, columns, strict=True)])
    sheet.append(list(_styled(sheet, names, bold=True)))
    sheet.append(list(_styled(sheet, [f"[{units[n]}]" if units[n] else "" for n in names], italic=True)))
    for row in zip(*columns, strict=True):
        sheet.append([_safe(sheet, cell) for cell in row])
    if table.shape[1]:
        sheet.auto_filter.ref = f"A1:{_letter(table.shape[1])}{len(table) + 2}"


def _notes(book: Workbook, meta: Mapping[str, object]) -> None:
    sheet = book.create_sheet("notes")
    _widths(sheet, [28, 100])
    sheet.append(list(_styled(sheet, ["what", "value"], bold=True)))
    sheet.append(["units", "second row of each sheet: SI, angles in degrees, lengths in fractions of chord"])
    for key, text in _lines("", plain(dict(meta))):
        sheet.append([_safe(sheet, key), _safe(sheet, text)])


def _lines(key: str, value: object) -> Iterator[tuple[str, Cell]]:
    if isinstance(value, Mapping):
        for name, item in value.items():
            yield from _lines(f"{key}, {name}" if key else str(name), item)
    elif isinstance(value, Sequence) and not isinstance(value, str):
        for item in value:
            yield from _lines(key, item)
    elif value is None or isinstance(value, str | int | float | bool):
        yield key, value


def _safe(sheet: WriteOnlyWorksheet, value: Cell) -> object:
    """Numbers pass; text becomes a cell of type string, which no program evaluates, marked as quoted."""
    if not isinstance(value, str):
        return value
    from openpyxl.cell import WriteOnlyCell

    cell = WriteOnlyCell(sheet)
    cell.value = one_line(value).replace("\t", " ")[:TEXT]
    if cell.data_type != "s":
        cell.data_type = "s"
        cell.quotePrefix = True
    return cell


def _styled(
    sheet: WriteOnlyWorksheet, texts: Sequence[str], bold: bool = False, italic: bool = False
) -> Iterator[object]:
    from openpyxl.cell import WriteOnlyCell
    from openpyxl.styles import Font

    for text in texts:
        cell = WriteOnlyCell(sheet)
        cell.value = one_line(text)
        cell.data_type = "s"
        cell.font = Font(bold=bold, italic=italic)
        yield cell


def _width(name: str, unit: str, values: Sequence[Cell]) -> float:
    longest = max((len(str(v)) for v in values[:200] if v is not None), default=0)
    return min(max(len(name) + 3, len(unit) + 3, min(longest, 22) + 1), 48)


def _widths(sheet: WriteOnlyWorksheet, widths: Sequence[float]) -> None:
    for i, width in enumerate(widths, start=1):
        sheet.column_dimensions[_letter(i)].width = width


def _letter(column: int) -> str:
    from openpyxl.utils import get_column_letter

    return str(get_column_letter(column))
