"""Tables as CSV and Parquet."""

from __future__ import annotations

import csv
import io
from pathlib import Path
from typing import TYPE_CHECKING

from tapband.files.write_columns import Cell, cells, ordered, units_of
from tapband.files.write_text import defused
from tapband.nouns.errors import QuestionError

if TYPE_CHECKING:
    import pandas as pd


def csv_text(name: str, frame: pd.DataFrame) -> str:
    """The table as CSV: one header row, shortest digits that give each number back, missing cells empty."""
    table = ordered(name, frame)
    out = io.StringIO(newline="")
    rows = csv.writer(out, lineterminator="\n")
    rows.writerow([defused(str(column)) for column in table.columns])
    rows.writerows(zip(*(_texts(cells(table[column])) for column in table.columns), strict=True))
    return out.getvalue()


def _texts(column: list[Cell]) -> list[str]:
    known: dict[str, str] = {}  # names repeat over thousands of rows

    def text(cell: Cell) -> str:
        if isinstance(cell, str):
            if cell not in known:
                known[cell] = defused(cell)
            return known[cell]
        if cell is None:
            return ""
        return ("no", "yes")[cell] if isinstance(cell, bool) else repr(cell)

    return [text(cell) for cell in column]


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
