"""Cells that already have a type (workbooks, Parquet): as numbers, as texts, as faults."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import date, datetime
from math import isfinite, nan

import numpy as np
from numpy.typing import NDArray

from tapband.files.faults import Findings, shown
from tapband.files.tables import MISSING, Array


def text_of(value: object) -> str:
    """A cell as text; whole numbers without a decimal point, a missing one as the empty text."""
    if value is None or (isinstance(value, float) and value != value):
        return ""
    if isinstance(value, float) and value.is_integer() and abs(value) < 1e15:
        return str(int(value))
    if isinstance(value, datetime) and not (value.hour or value.minute or value.second):
        return value.date().isoformat()
    text = value.isoformat() if isinstance(value, date) else str(value).strip()
    return "" if text in MISSING else text


def numbers_of(
    columns: Sequence[Sequence[object] | Array], names: Sequence[str], lines: NDArray[np.int64], file: str,
    findings: Findings,
) -> tuple[Array, NDArray[np.bool_]]:  # fmt: skip
    """Typed cells of some columns as numbers (R, k), NaN where missing, and which are no finite number.

    The latter are noted.
    """
    out = np.full((len(lines), len(columns)), nan)
    refused = np.zeros(out.shape, dtype=np.bool_)
    for place, (cells, name) in enumerate(zip(columns, names, strict=True)):
        if isinstance(cells, np.ndarray) and not np.isinf(cells).any():
            out[:, place] = cells
            continue
        for row, cell in enumerate(cells):
            number, rule = _number(cell)
            out[row, place] = number
            if rule:
                refused[row, place] = True
                findings.add(
                    f"{file}, row {lines[row]}, column {name}", rule, shown(text_of(cell)),
                    "write a number, or leave the cell empty where it is missing",
                    kind=f"{file}, column {name}",
                )  # fmt: skip
    return out, refused


def _number(cell: object) -> tuple[float, str]:
    """The number of a cell and the rule it breaks (empty: none)."""
    if cell is None or (isinstance(cell, str) and cell.strip() in MISSING):
        return nan, ""
    if isinstance(cell, bool) or not isinstance(cell, (int, float)):
        try:
            number = nan if not isinstance(cell, str) else float(cell)
        except ValueError:
            number = nan
        return (number, "") if isfinite(number) else (nan, "must be a number")
    return (float(cell), "") if isfinite(cell) or cell != cell else (nan, "must be finite")
