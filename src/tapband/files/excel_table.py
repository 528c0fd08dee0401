"""Workbooks (.xlsx) as tables: the first sheet, read row by row. Needs the extra ``excel``."""

from __future__ import annotations

import warnings
from collections.abc import Generator, Iterator, Sequence
from functools import partial
from importlib.util import find_spec
from itertools import islice
from pathlib import Path
from typing import Any

import numpy as np

from tapband.files.cells import numbers_of, text_of
from tapband.files.faults import Findings, shown
from tapband.files.tables import Block, BrokenTableError, Table, read_header

ROWS = 4096
Row = tuple[int, tuple[object, ...]]


def open_excel(path: Path, name: str, findings: Findings) -> Table | None:
    """The table on the first sheet of a workbook, its header read."""
    if find_spec("openpyxl") is None:
        findings.add(name, 'needs the extra "excel"', "no openpyxl", "run pip install 'tapband[excel]'")
        return None
    try:
        rows, others = _rows(path)
        head = next(rows, None)
        rows.close()
    except Exception as error:  # openpyxl raises what zipfile, its XML parser or its own checks raise
        findings.add(name, "cannot be read as a workbook", _first_line(error), "save it again as .xlsx")
        return None
    if others:
        findings.warn(f"{name}: only the first sheet is read; not read: {', '.join(others)}")
    if head is None:
        findings.add(name, "is empty", do="write a header row and the rows below it")
        return None
    cells = [text_of(cell) for cell in head[1]]
    columns = read_header(cells, name, f"{name}, row {head[0]}", findings)
    if columns is None:
        return None
    names = {column.index: column.name for column in columns}
    return Table(file=name, columns=columns, row_word="row", blocks=partial(_blocks, path, name, names))


def _first_line(error: Exception) -> str:
    return shown((str(error).splitlines() or [type(error).__name__])[0])


def _rows(path: Path) -> tuple[Generator[Row, None, None], list[str]]:
    """Rows of the first sheet that hold anything, comments left out, and the names of the other sheets."""
    import openpyxl

    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # styles and extensions that openpyxl does not know do not matter
        book: Any = openpyxl.load_workbook(path, read_only=True, data_only=True)
    sheet = book.worksheets[0]
    others = [other.title for other in book.worksheets[1:]]

    def rows() -> Generator[Row, None, None]:
        try:
            for number, row in enumerate(sheet.iter_rows(values_only=True), start=1):
                first = row[0] if row else None
                if isinstance(first, str) and first.startswith("#") and first != "#N/A":
                    continue
                if any(cell is not None and cell != "" for cell in row):
                    yield number, row
        finally:
            book.close()

    return rows(), others


def _next(rows: Iterator[Row], name: str, findings: Findings) -> list[Row]:
    """The next rows, none at the end of the sheet."""
    try:
        return list(islice(rows, ROWS))
    except Exception as error:  # openpyxl raises what zipfile, its XML parser or its own checks raise
        findings.add(name, "breaks off", _first_line(error), "save it again as .xlsx")
        raise BrokenTableError(name) from None


def _blocks(
    path: Path, name: str, names: dict[int, str], numbers: Sequence[int], texts: Sequence[int],
    findings: Findings,
) -> Iterator[Block]:  # fmt: skip
    rows, _ = _rows(path)
    next(rows, None)
    while block := _next(rows, name, findings):
        lines = np.array([number for number, _ in block], dtype=np.int64)

        def column(index: int, block: list[Row] = block) -> list[object]:
            return [row[index] if index < len(row) else None for _, row in block]

        found, refused = numbers_of(
            [column(i) for i in numbers], [names[i] for i in numbers], lines, name, findings
        )
        cells = tuple([text_of(cell) for cell in column(i)] for i in texts)
        yield Block(lines=lines, numbers=found, texts=cells, refused=refused)
