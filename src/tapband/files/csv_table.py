"""CSV tables in blocks of bounded memory: NumPy's reader where a block is plain, cell by cell where not.

The plain way takes blanks, missing tokens and decimal commas; what it cannot read is read again cell by
cell, so that every bad cell gets its place.
"""

from __future__ import annotations

import csv
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import partial
from itertools import islice
from math import isfinite, nan
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from tapband.files.campaign_text import note_encoding, note_system
from tapband.files.faults import Findings, shown
from tapband.files.tables import MISSING, Array, Block, BrokenTableError, Table, read_header

ROWS = 4096
"""Rows of a block."""
MARKS = ("\t", ";", ",")
_SNIFF = 1 << 18
_BREAK = "must not break the line inside a cell: such breaks are not read"
_JOIN = "write the cell on one line, or remove the quotation mark"
_NUMBER = re.compile(r"[+-]?(?:\d+([.,]?)\d*|([.,])\d+)(?:[eE][+-]?\d+)?")


@dataclass(frozen=True, slots=True, kw_only=True)
class Dialect:
    """How the numbers of a file are written and its cells divided."""

    delimiter: str
    comma: bool
    """Whether the decimal mark is a comma."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Shape:
    """Line of the header, number of its cells, and the names by position."""

    first: int
    width: int
    names: dict[int, str]


@dataclass(frozen=True, slots=True, kw_only=True)
class Lines:
    """Rows of a file with their line numbers (R,); ``quoted`` where one has quotation marks."""

    at: NDArray[np.int64]
    rows: list[str]
    quoted: bool


def open_csv(path: Path, name: str, findings: Findings) -> Table | None:
    """The CSV table of a file, its header read."""
    try:
        with path.open("rb") as file:
            head = file.read(_SNIFF)
    except OSError as error:
        note_system(error, name, findings)
        return None
    if not _is_text(head, name, findings):
        return None
    cut = len(head) == _SNIFF
    lines = _data_lines(head.decode("utf-8-sig", errors="ignore").replace("\r\n", "\n").replace("\r", "\n"))
    if not lines:
        findings.add(name, "is empty", do="write a header row and the rows below it")
        return None
    first = lines[0][0]
    if lines[0][1].count('"') % 2:
        findings.add(f"{name}, line {first}", _BREAK, shown(lines[0][1]), _JOIN)
        return None
    dialect = _sniff([line for _, line in (cut and lines[:-1]) or lines])  # the last one may be cut short
    cells = _cells(lines[0][1], dialect)
    columns = read_header(cells, name, f"{name}, line {first}", findings)
    if columns is None:
        return None
    shape = Shape(first=first, width=len(cells), names={column.index: column.name for column in columns})
    return Table(
        file=name, columns=columns, row_word="line", blocks=partial(_blocks, path, name, dialect, shape)
    )


def _is_text(head: bytes, name: str, findings: Findings) -> bool:
    if head[:2] in {b"\xff\xfe", b"\xfe\xff"}:
        note_encoding(head, 0, name, findings)
        return False
    if head[:4] in {b"PK\x03\x04", b"PAR1"} or b"\0" in head:
        kind = {b"PK\x03\x04": "a workbook", b"PAR1": "a parquet file"}.get(head[:4], "binary data")
        findings.add(name, "must be text", kind, "end its name in .xlsx or .parquet, or save it as CSV")
        return False
    return True


def _is_data(row: str) -> bool:
    """Whether a row is neither a comment nor blank."""
    return bool(row.strip(",;\t") and row.strip()) and not (
        row.startswith("#") and not row.startswith("#N/A")
    )


def _data_lines(text: str) -> list[tuple[int, str]]:
    """Numbered rows of a text that are neither comments nor blank."""
    return [(number, row) for number, row in enumerate(text.split("\n"), start=1) if _is_data(row)]


def _sniff(lines: Sequence[str]) -> Dialect:
    """Delimiter by the header row and the row below it, then the decimal mark by what most numbers bear."""
    counts = {
        mark: [len(_cells(row, Dialect(delimiter=mark, comma=False))) for row in lines[:2]] for mark in MARKS
    }
    even = [mark for mark, found in counts.items() if found[0] > 1 and len(set(found)) == 1]
    delimiter = even[0] if even else max(MARKS, key=lambda mark: counts[mark][0])
    if delimiter == ",":
        return Dialect(delimiter=delimiter, comma=False)
    marks = [
        match[1] or match[2] or ""
        for line in lines[1:]
        for cell in line.split(delimiter)
        if (match := _NUMBER.fullmatch(cell.strip()))
    ]
    return Dialect(delimiter=delimiter, comma=marks.count(",") > marks.count("."))


def _cells(line: str, dialect: Dialect) -> list[str]:
    if '"' in line:
        try:
            return next(csv.reader([line], delimiter=dialect.delimiter))
        except csv.Error:
            return [line]
    return line.split(dialect.delimiter)


def _blocks(
    path: Path, name: str, dialect: Dialect, shape: Shape, numbers: Sequence[int], texts: Sequence[int],
    findings: Findings,
) -> Iterator[Block]:  # fmt: skip
    """Blocks of rows; rows of another width than the header are noted and left out."""
    try:
        with path.open(encoding="utf-8-sig", newline=None) as file:
            done = 0
            while raw := list(islice(file, ROWS)):
                lines = _even(raw, done, name, dialect, shape, findings)
                done += len(raw)
                if lines.rows:
                    yield _read(lines, name, dialect, shape, numbers, texts, findings)
    except UnicodeDecodeError:
        data = path.read_bytes()
        try:
            data.decode("utf-8-sig")
        except UnicodeDecodeError as error:
            note_encoding(data, error.start, name, findings)
        raise BrokenTableError(name) from None
    except OSError as error:
        note_system(error, name, findings)
        raise BrokenTableError(name) from None


def _even(raw: list[str], done: int, name: str, dialect: Dialect, shape: Shape, findings: Findings) -> Lines:
    """Rows of the header's width behind the header; ``done`` lines came before these."""
    text = "".join(raw)
    rows = text.removesuffix("\n").split("\n")
    at = np.arange(done + 1, done + len(rows) + 1, dtype=np.int64)
    quoted, mark = '"' in text, dialect.delimiter
    plain = done >= shape.first and not quoted and "#" not in text and min(map(len, rows)) >= shape.width
    if plain and {row.count(mark) for row in rows} == {shape.width - 1}:
        return Lines(at=at, rows=rows, quoted=False)
    keep, inside = [], False
    for i, row in enumerate(rows):
        if at[i] <= shape.first or not _is_data(row):
            continue
        if inside:  # the rest of a cell that is noted already
            inside = row.count('"') % 2 == 0
            continue
        cells = len(_cells(row, dialect))
        if cells == shape.width:
            keep.append(i)
            continue
        if row.count('"') % 2:
            findings.add(f"{name}, line {at[i]}", _BREAK, shown(row), _JOIN, kind=name)
            inside = True
            continue
        findings.add(
            f"{name}, line {at[i]}", f"must have {shape.width} cells like the header", str(cells),
            "add the missing cells" if cells < shape.width else "remove the extra cells or delimiters",
            kind=name,
        )  # fmt: skip
    return Lines(at=at[keep], rows=[rows[i] for i in keep], quoted=quoted)


def _read(
    lines: Lines, name: str, dialect: Dialect, shape: Shape, numbers: Sequence[int], texts: Sequence[int],
    findings: Findings,
) -> Block:  # fmt: skip
    """One block, by NumPy where it can read it, else cell by cell."""
    plain, refused = _plain(lines, dialect, numbers), None
    if plain is None or (texts and lines.quoted):
        cells = [_cells(row, dialect) for row in lines.rows]
        if plain is None:
            plain, refused = _by_cell(cells, lines.at, name, dialect, shape, numbers, findings)
    else:
        last = max(texts, default=0) + 1
        cells = [row.split(dialect.delimiter, last) for row in lines.rows] if texts else []
    columns = tuple(["" if (cell := row[i].strip()) in MISSING else cell for row in cells] for i in texts)
    return Block(lines=lines.at, numbers=plain, texts=columns, refused=refused)


def _plain(lines: Lines, dialect: Dialect, numbers: Sequence[int]) -> Array | None:
    """Numbers of plain rows (R, k), None where NumPy cannot read them or one is infinite."""
    rows = lines.rows
    if not numbers:
        return np.empty((len(rows), 0))
    if lines.quoted:
        return None
    found = None if dialect.comma else _numpy(rows, dialect, numbers)
    if found is None:
        mark = dialect.delimiter
        text = mark + f"{mark}\n{mark}".join(rows) + mark
        if dialect.comma and "." in text:
            return None
        for token in ("", "NA", "#N/A"):
            bare, missing = f"{mark}{token}{mark}", f"{mark}nan{mark}"
            text = text.replace(bare, missing).replace(bare, missing)
        if dialect.comma:
            text = text.replace(",", ".")
        found = _numpy(text.split("\n"), dialect, [index + 1 for index in numbers])
    return None if found is None or np.isinf(found).any() else found


def _numpy(rows: list[str], dialect: Dialect, columns: Sequence[int]) -> Array | None:
    """Columns of rows (R, k), None where a cell is no number to NumPy."""
    try:
        found: Array = np.loadtxt(
            rows, delimiter=dialect.delimiter, comments=None, usecols=columns, ndmin=2, dtype=np.float64
        )
    except ValueError:
        return None
    return found


def _by_cell(
    cells: list[list[str]], places: NDArray[np.int64], name: str, dialect: Dialect, shape: Shape,
    numbers: Sequence[int], findings: Findings,
) -> tuple[Array, NDArray[np.bool_]]:  # fmt: skip
    """Numbers cell by cell (R, k) and which cells hold none: these are noted and count as missing."""
    out = np.full((len(cells), len(numbers)), nan)
    refused = np.zeros(out.shape, dtype=np.bool_)
    for row, line in enumerate(places.tolist()):
        for column, index in enumerate(numbers):
            text = cells[row][index].strip()
            if text in MISSING:
                continue
            number = _number(text, dialect)
            if number is not None and isfinite(number):
                out[row, column] = number
            else:
                refused[row, column] = True
                where = f"{name}, column {shape.names[index]}"
                place = f"{name}, line {line}, column {shape.names[index]}"
                rule, do = _why(text, number, dialect)
                findings.add(place, rule, shown(text), do, kind=where)
    return out, refused


def _number(text: str, dialect: Dialect) -> float | None:
    """The number a cell holds, None where it is none."""
    match = _NUMBER.fullmatch(text)
    mark = (match[1] or match[2]) if match else ""
    wrong = "." if dialect.comma else ","
    if match is None or mark == wrong:
        return None if text.lower().lstrip("+-") not in {"inf", "infinity"} else float("inf")
    return float(text.replace(",", "."))


def _why(text: str, number: float | None, dialect: Dialect) -> tuple[str, str]:
    """Rule broken and what to do, of a cell that holds no finite number."""
    if number is not None:
        return "must be finite", "write a finite number, or leave the cell empty where it is missing"
    if _NUMBER.fullmatch(text):
        used = "comma" if dialect.comma else "point"
        return f"must have the decimal {used} of the rest of the file", f"write a decimal {used}"
    return "must be a number", "write a number, or leave the cell empty where it is missing"
