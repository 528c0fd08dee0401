"""Everything as one JSON text, and the text back.

Not-a-number becomes null. Infinite degrees of freedom become null too; the columns that hold them are listed
under ``infinite``, so that they can be told apart from missing ones when the file is read again.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import fields, is_dataclass
from enum import Enum
from math import inf, isfinite
from typing import TYPE_CHECKING

import numpy as np

from tapband.files.write_columns import cells, units_of

if TYPE_CHECKING:
    import pandas as pd

FORMAT = 1
RESERVED = ("tapband", "format", "files", "tables")


def json_text(
    version: str, files: Sequence[str], meta: Mapping[str, object], tables: Mapping[str, pd.DataFrame]
) -> str:
    """The text of ``results.json``; the first three keys mark a folder as ours, so they come first."""
    head = {"tapband": version, "format": FORMAT, "files": sorted(files)}
    body = {key: plain(value) for key, value in meta.items() if key not in RESERVED}
    out = {**head, **body, "tables": {name: _table(name, frame) for name, frame in tables.items()}}
    return json.dumps(out, allow_nan=False, ensure_ascii=True, separators=(",", ":"))


def plain(value: object) -> object:
    """The value as JSON can hold it: mappings, lists, text, numbers; null where not finite."""
    if value is None or isinstance(value, str | bool | int):
        return value.value if isinstance(value, Enum) else value
    if isinstance(value, float | np.floating):
        return float(value) if isfinite(value) else None
    if isinstance(value, np.generic):
        return plain(value.item())
    if isinstance(value, np.ndarray):
        return plain(value.tolist())
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if is_dataclass(value):
        return {field.name: plain(getattr(value, field.name)) for field in fields(value)}
    if isinstance(value, Sequence | set | frozenset):
        return [plain(item) for item in value]
    return str(value)


def _table(name: str, frame: pd.DataFrame) -> dict[str, object]:
    index = [str(level) for level in frame.index.names if level is not None]
    flat = frame.reset_index(level=[i for i in index if i not in frame.columns]) if index else frame
    return {
        "units": units_of(name, flat),
        "index": index,
        "infinite": [str(column) for column in flat.columns if _any_infinite(flat[column])],
        "columns": {str(column): cells(flat[column]) for column in flat.columns},
    }


def _any_infinite(series: pd.Series) -> bool:
    return series.dtype.kind == "f" and bool(np.isinf(np.asarray(series, dtype=float)).any())


def tables_from(entries: object) -> dict[str, pd.DataFrame]:
    """The tables that :func:`json_text` wrote: same columns, index, units, and infinities where they were."""
    return {name: _table_from(_mapping(entry)) for name, entry in _mapping(entries).items()}


def _table_from(entry: Mapping[str, object]) -> pd.DataFrame:
    import pandas as pd

    columns, units = _mapping(entry["columns"]), _mapping(entry["units"])
    index, infinite = _names(entry["index"]), _names(entry["infinite"])
    frame = pd.DataFrame({column: _column(values) for column, values in columns.items()})
    for column in infinite:
        partner = f"{column.removesuffix('_dof')}_u" if column.endswith("_dof") else "contribution"
        known = frame[partner].notna() if partner in frame.columns else True
        frame.loc[frame[column].isna() & known, column] = inf
    frame.attrs["units"] = {column: str(unit) for column, unit in units.items()}
    return frame.set_index(index) if index else frame


def _mapping(value: object) -> Mapping[str, object]:
    if not isinstance(value, Mapping):
        raise TypeError(f"expected an object, got {type(value).__name__}")
    return value


def _names(value: object) -> list[str]:
    return [str(item) for item in _list(value)]


def _list(value: object) -> list[object]:
    if not isinstance(value, list):
        raise TypeError(f"expected an array, got {type(value).__name__}")
    return value


def _column(stored: object) -> list[object] | np.ndarray:
    values = _list(stored)
    if any(isinstance(value, str) for value in values):
        return values
    if values and all(isinstance(value, bool | int) for value in values):
        return np.array(values)
    return np.array([np.nan if value is None else value for value in values], dtype=float)
