"""Tables as CSV and Parquet."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from tapband.files.write_columns import Cell, cells, coded, ordered, units_of
from tapband.files.write_text import defused
from tapband.nouns.errors import QuestionError

if TYPE_CHECKING:
    import pandas as pd


def csv_text(name: str, frame: pd.DataFrame) -> str:
    """The table as CSV: one header row, shortest digits that give each number back, missing cells empty."""
    table = ordered(name, frame)
    head = ",".join(_quoted(defused(str(column))) for column in table.columns)
    lines = map(",".join, zip(*(_texts(table[column]) for column in table.columns), strict=True))
    return "\n".join([head, *lines, ""])


def _texts(series: pd.Series) -> list[str]:
    words = coded(series)
    if words is not None:
        codes, names = words
        texts = [_text(name) for name in names]
        return [texts[code] for code in codes]
    if series.dtype.kind == "f":
        values = np.asarray(series, dtype=float)
        digits = list(map(repr, values.tolist()))
        for i in np.flatnonzero(~np.isfinite(values)).tolist():
            digits[i] = ""
        return digits
    return [_text(cell) for cell in cells(series)]


def _text(cell: Cell) -> str:
    if cell is None:
        return ""
    if isinstance(cell, str):
        return _quoted(defused(cell))
    return ("no", "yes")[cell] if isinstance(cell, bool) else repr(cell)


def _quoted(text: str) -> str:
    """The text as one CSV field (RFC 4180, 2.5-2.7)."""
    return (
        '"' + text.replace('"', '""') + '"' if any(c in text for c in ',"') or text != text.strip() else text
    )


def write_csv(path: Path, name: str, frame: pd.DataFrame) -> None:
    """Write one table as UTF-8 CSV."""
    path.write_bytes(csv_text(name, frame).encode("utf-8", "replace"))


def write_parquet(path: Path, name: str, frame: pd.DataFrame) -> None:
    """Write one table as Parquet, units of the columns in the metadata of its fields."""
    try:
        import pyarrow as pa
        import pyarrow.parquet as pq
    except ImportError as error:
        need = "--parquet: needs the package pyarrow; got none; install tapband[parquet]"
        raise QuestionError(need) from error
    table = ordered(name, frame)
    units = units_of(name, table)
    columns = {str(column): pa.array(cells(table[column])) for column in table.columns}
    schema = pa.schema([pa.field(c, array.type, metadata={"unit": units[c]}) for c, array in columns.items()])
    pq.write_table(pa.table(list(columns.values()), schema=schema), path)
