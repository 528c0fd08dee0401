"""Parquet files as tables, streamed batch by batch. Needs the extra ``parquet``."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np

from tapband.files.cells import numbers_of, text_of
from tapband.files.faults import Findings, shown
from tapband.files.tables import Array, Block, BrokenTableError, Table, read_header

ROWS = 4096


def open_parquet(path: Path, name: str, findings: Findings) -> Table | None:
    """The table of a Parquet file, its column names read."""
    try:
        import pyarrow.parquet as parquet
    except ImportError:
        findings.add(name, 'needs the extra "parquet"', "no pyarrow", "run pip install 'tapband[parquet]'")
        return None
    try:
        with parquet.ParquetFile(path) as file:
            heads = [field.name for field in file.schema_arrow]
    except Exception as error:  # pyarrow raises errors of its own and of the system
        got = shown((str(error).splitlines() or [type(error).__name__])[0])
        findings.add(name, "cannot be read as a Parquet file", got, "write it again")
        return None
    heads = ["" if head.startswith("__index_level_") else head for head in heads]
    columns = read_header(heads, name, f"{name}, header", findings)
    if columns is None:
        return None
    names = {column.index: column.name for column in columns}
    return Table(file=name, columns=columns, row_word="row", blocks=partial(_blocks, path, name, names))


def _blocks(
    path: Path, name: str, names: dict[int, str], numbers: Sequence[int], texts: Sequence[int],
    findings: Findings,
) -> Iterator[Block]:  # fmt: skip
    done = 0
    for batch in _batches(path, name, [*numbers, *texts], findings):
        lines = np.arange(done + 1, done + batch.num_rows + 1, dtype=np.int64)
        done += batch.num_rows
        columns = [_numeric(batch.column(i)) for i in range(len(numbers))]
        found, refused = numbers_of(columns, [names[i] for i in numbers], lines, name, findings)
        cells = range(len(numbers), len(numbers) + len(texts))
        yield Block(
            lines=lines, numbers=found, refused=refused,
            texts=tuple([text_of(cell) for cell in batch.column(i).to_pylist()] for i in cells),
        )  # fmt: skip


def _batches(path: Path, name: str, wanted: Sequence[int], findings: Findings) -> Iterator[Any]:
    """Record batches of the columns at these positions, in this order."""
    import pyarrow.parquet as parquet

    try:
        with parquet.ParquetFile(path) as file:
            heads = [file.schema_arrow.names[i] for i in wanted]
            for batch in file.iter_batches(batch_size=ROWS, columns=list(dict.fromkeys(heads))):
                yield batch.select(heads)
    except Exception as error:  # pyarrow raises errors of its own and of the system
        got = shown((str(error).splitlines() or [type(error).__name__])[0])
        findings.add(name, "breaks off", got, "write it again")
        raise BrokenTableError(name) from None


def _numeric(column: Any) -> Sequence[object] | Array:
    """A column as an array of floats where it is numeric, else its values."""
    import pyarrow

    kind = column.type
    if pyarrow.types.is_floating(kind) or pyarrow.types.is_integer(kind):
        values: Any = column.cast(pyarrow.float64(), safe=False).to_numpy(zero_copy_only=False)
        return np.asarray(values, dtype=np.float64)
    cells: list[object] = column.to_pylist()
    return cells
