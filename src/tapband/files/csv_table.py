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
_SNIFF = 1 << 18
_NUMBER = re.compile(r"[+-]?(?:\d+([.,]?)\d*|([.,])\d+)(?:[eE][+-]?\d+)?")


@dataclass(frozen=True, slots=True, kw_only=True)
class Dialect:
    """How the numbers of a file are written and its cells divided."""

    delimiter: str
    comma: bool
    """Whether the decimal mark is a comma."""


Line = tuple[int, str]


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
    text = head.decode("utf-8-sig", errors="ignore")
    lines = list(_data_lines(iter(text.splitlines(keepends=True))))
    if not lines:
        findings.add(name, "is empty", do="write a header row and the rows below it")
        return None
    dialect = _sniff([line for _, line in lines[:-1] or lines])
    cells = _cells(lines[0][1], dialect)
    columns = read_header(cells, name, f"{name}, line {lines[0][0]}", findings)
    if columns is None:
        return None
    blocks = partial(_blocks, path, name, dialect, len(cells), {c.index: c.name for c in columns})
    return Table(file=name, columns=columns, row_word="line", blocks=blocks)


def _is_text(head: bytes, name: str, findings: Findings) -> bool:
    if head[:2] in {b"\xff\xfe", b"\xfe\xff"}:
        note_encoding(head, 0, name, findings)
        return False
    if head[:4] in {b"PK\x03\x04", b"PAR1"} or b"\0" in head:
        kind = {b"PK\x03\x04": "a workbook", b"PAR1": "a parquet file"}.get(head[:4], "binary data")
        findings.add(name, "must be text", kind, "end its name in .xlsx or .parquet, or save it as CSV")
        return False
    return True


def _data_lines(lines: Iterator[str]) -> Iterator[Line]:
    """Numbered lines without comments and blank lines; line ends cut off."""
    for number, line in enumerate(lines, start=1):
        text = line.rstrip("\r\n")
        if text.startswith("#") and not text.startswith("#N/A"):
            continue
        if text.strip(" \t,;"):
            yield number, text


def _sniff(lines: Sequence[str]) -> Dialect:
    """Delimiter by the header row and the row below it, then the decimal mark by what most numbers bear."""
    delimiter = ","
    for mark in ("\t", ";", ","):
        counts = {len(_cells(line, Dialect(delimiter=mark, comma=False))) for line in lines[:2]}
        if max(counts) > 1 and (len(counts) == 1 or mark in "\t;"):
            delimiter = mark
            break
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
    path: Path, name: str, dialect: Dialect, width: int, names: dict[int, str],
    numbers: Sequence[int], texts: Sequence[int], findings: Findings,
) -> Iterator[Block]:  # fmt: skip
    """Blocks of rows; rows of another width than the header are noted and left out."""
    try:
        with path.open(encoding="utf-8-sig", newline=None) as file:
            lines = _data_lines(file)
            next(lines, None)
            while block := list(islice(lines, ROWS)):
                block = _even(block, name, dialect, width, names, findings)
                if block:
                    yield _read(block, name, dialect, names, numbers, texts, findings)
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


def _even(
    lines: list[Line], name: str, dialect: Dialect, width: int, names: dict[int, str], findings: Findings
) -> list[Line]:
    """Lines of the header's width."""
    mark = dialect.delimiter
    if all(line.count(mark) == width - 1 and '"' not in line for _, line in lines):
        return lines
    even = []
    for number, line in lines:
        cells = len(_cells(line, dialect))
        if cells == width:
            even.append((number, line))
            continue
        findings.add(
            f"{name}, line {number}", f"must have {width} cells like the header", str(cells),
            "add the missing cells" if cells < width else "remove the extra cells or delimiters", kind=name,
        )  # fmt: skip
    return even


def _read(
    lines: list[Line], name: str, dialect: Dialect, names: dict[int, str], numbers: Sequence[int],
    texts: Sequence[int], findings: Findings,
) -> Block:  # fmt: skip
    """One block, by NumPy where it can read it, else cell by cell."""
    places = np.array([number for number, _ in lines], dtype=np.int64)
    rows = [line for _, line in lines]
    plain = _plain(rows, dialect, numbers)
    quoted = any('"' in row for row in rows)
    if plain is None or (texts and quoted):
        cells = [_cells(row, dialect) for row in rows]
        columns = tuple([row[i].strip() for row in cells] for i in texts)
        if plain is None:
            plain = _by_cell(cells, places, name, dialect, names, numbers, findings)
    else:
        last = max(texts, default=0) + 1
        cells = [row.split(dialect.delimiter, last) for row in rows] if texts else []
        columns = tuple([row[i].strip() for row in cells] for i in texts)
    return Block(lines=places, numbers=plain, texts=columns)


def _plain(rows: list[str], dialect: Dialect, numbers: Sequence[int]) -> Array | None:
    """Numbers of plain rows (R, k), None where NumPy cannot read them or one is infinite."""
    if not numbers:
        return np.empty((len(rows), 0))
    mark = dialect.delimiter
    text = mark + f"{mark}\n{mark}".join(rows) + mark
    if '"' in text or (dialect.comma and "." in text):
        return None
    for token in ("", "NA", "#N/A"):
        bare = f"{mark}{token}{mark}"
        if bare in text:
            text = text.replace(bare, f"{mark}nan{mark}").replace(bare, f"{mark}nan{mark}")
    if dialect.comma:
        text = text.replace(",", ".")
    columns = [index + 1 for index in numbers]
    try:
        found: NDArray[np.float64] = np.loadtxt(
            text.split("\n"), delimiter=mark, comments=None, usecols=columns, ndmin=2, dtype=np.float64
        )
    except ValueError:
        return None
    return None if np.isinf(found).any() else found


def _by_cell(
    cells: list[list[str]], places: NDArray[np.int64], name: str, dialect: Dialect, names: dict[int, str],
    numbers: Sequence[int], findings: Findings,
) -> Array:  # fmt: skip
    """Numbers cell by cell (R, k); a cell that is none is noted and counts as missing."""
    out = np.full((len(cells), len(numbers)), nan)
    for row, line in enumerate(places.tolist()):
        for column, index in enumerate(numbers):
            text = cells[row][index].strip()
            if text in MISSING:
                continue
            number = _number(text, dialect)
            if number is not None and isfinite(number):
                out[row, column] = number
            else:
                where = f"{name}, column {names[index]}"
                place = f"{name}, line {line}, column {names[index]}"
                rule, do = _why(text, number, dialect)
                findings.add(place, rule, shown(text), do, kind=where)
    return out


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
