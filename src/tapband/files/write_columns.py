"""Units, order and cells of the columns that go out: one place for every format and the report."""

from __future__ import annotations

from collections.abc import Mapping
from math import isfinite
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from tapband.nouns.symbols import ENDINGS, MEASURED, QUANTITIES

if TYPE_CHECKING:
    import pandas as pd

Cell = str | int | float | bool | None

COEFFICIENTS = MEASURED
SUFFIXES = tuple(ENDINGS)
"""What follows a coefficient's name in ``coefficients.csv``."""

ORDER: Mapping[str, tuple[str, ...]] = MappingProxyType(
    {
        "cp": ("point", "run", "tap", "x", "y", "cp", "cp_u", "cp_U", "cp_low", "cp_high", "flag"),
        "budget": (
            "point", "run", "coefficient", "source", "group", "standard_uncertainty", "unit",
            "sensitivity", "contribution", "share", "dof",
        ),
        "tap_ranking": (
            "point", "run", "coefficient", "tap", "x", "y", "weight", "share", "if_lost", "rank",
        ),
        "ranking": (
            "point", "run", "coefficient", "group", "linear_share", "first_order", "first_order_ci",
            "total", "total_ci", "rank",
        ),
        "correlation": ("point", "run", "a", "b", "correlation", "covariance"),
        "differences": (
            "a", "b", "coefficient", "difference", "u", "U", "k", "low", "high", "u_if_independent",
            "significant",
        ),
        "fits": (
            "run", "config", "quantity", "value", "u", "U", "k", "low", "high", "points_used", "note",
        ),
        "repeats": (
            "config", "alpha", "coefficient", "n", "scatter", "predicted", "dof", "chi2", "p", "verdict",
        ),
        "regions": ("point", "run", "a", "b", "k", "semi_major", "semi_minor", "tilt", "method"),
        "decisions": (
            "point", "coefficient", "value", "U", "lower", "upper", "probability", "rule", "answer",
        ),
        "allowances": (
            "source", "declared", "allowed", "unit", "headroom", "binding_point", "binding_coefficient",
        ),
        "selection": ("slot", "option", "cost"),
        "layout": ("tap", "surface", "x", "y"),
        "wiring": ("tap", "module"),
        "ranges": ("tap", "lowest", "highest", "full_scale", "utilisation"),
    }
)  # fmt: skip
"""Columns that formats fix, in their order; further columns follow these."""

UNITS: Mapping[str, str] = MappingProxyType(
    {
        **{name: symbol.unit for name, symbol in QUANTITIES.items() if symbol.unit != "1"},
        "alpha_u": "deg", "nominal_alpha": "deg", "tilt": "deg",
        "q_u": "Pa", "lowest": "Pa", "highest": "Pa", "full_scale": "Pa",
    }
)  # fmt: skip

BY_ROW: Mapping[str, frozenset[str]] = MappingProxyType(
    {
        "budget": frozenset({"standard_uncertainty", "sensitivity"}),
        "allowances": frozenset({"declared", "allowed"}),
        "fits": frozenset({"value", "u", "U", "low", "high"}),
    }
)
"""Columns whose unit is that of the row: its ``unit`` column, or its ``quantity``."""


def ordered(name: str, frame: pd.DataFrame) -> pd.DataFrame:
    """The table with its named index levels as columns and the fixed columns first, in their order."""
    levels = [level for level in frame.index.names if level is not None]
    if levels:
        frame = frame.reset_index(level=[level for level in levels if level not in frame.columns])
    fixed = [column for column in ORDER.get(name, ()) if column in frame.columns]
    rest = [column for column in frame.columns if column not in fixed]
    return frame[[*fixed, *rest]]


def units_of(name: str, frame: pd.DataFrame) -> dict[str, str]:
    """Unit of every column: "1" for numbers without one, "" for text; the frame's own ``attrs`` win."""
    stated = frame.attrs.get("units", {})
    return {str(c): str(stated.get(c, _unit(name, str(c), frame[c]))) for c in frame.columns}


def _unit(name: str, column: str, series: pd.Series) -> str:
    if column in BY_ROW.get(name, ()):
        return "by row"
    if column in UNITS:
        return UNITS[column]
    return "1" if series.dtype.kind in "fiu" else ""


def cells(series: pd.Series) -> list[Cell]:
    """The column as plain Python values; None where missing or not finite."""
    kind = series.dtype.kind
    if kind == "f":
        values = np.asarray(series, dtype=float)
        out: list[Cell] = values.tolist()
        for i in np.flatnonzero(~np.isfinite(values)):
            out[i] = None
        return out
    if kind in "iu" and not series.hasnans:
        return [int(v) for v in series.tolist()]
    words = coded(series)
    if words is not None:
        codes, names = words
        return [names[code] for code in codes]
    return [_cell(value) for value in series.astype(object).tolist()]


def coded(series: pd.Series) -> tuple[list[int], list[Cell]] | None:
    """A column of text as codes and the few names they stand for (the last: missing); None for other columns.

    Names of points, taps and sources repeat over millions of rows.
    """
    import pandas as pd

    if series.dtype.kind in "fiub" or pd.api.types.infer_dtype(series, skipna=True) not in (
        "string",
        "empty",
    ):
        return None
    codes, names = pd.factorize(series.astype(object))
    return codes.tolist(), [*names.tolist(), None]


def _cell(value: object) -> Cell:
    if isinstance(value, bool | np.bool_):
        return bool(value)
    if isinstance(value, int | np.integer):
        return int(value)
    if isinstance(value, float | np.floating):
        return float(value) if isfinite(value) else None
    return value if isinstance(value, str) else None if _missing(value) else str(value)


def _missing(value: object) -> bool:
    return value is None or type(value).__name__ in {"NAType", "NaTType"}
