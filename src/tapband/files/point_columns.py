"""Which column of the points table is what, and with which unit."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.files.acts import Arrangement
from tapband.files.faults import Findings, RuleError, listed, nearest
from tapband.files.tables import STANDARD, Array, Column, Table, column_unit, need
from tapband.files.taps import TapList
from tapband.files.units import ANGLE, NUMBER, PRESSURE, TEMPERATURE, unit
from tapband.nouns.campaign import COEFFICIENT, STREAM_CHANNELS

CHANNELS = frozenset(name for columns in STREAM_CHANNELS.values() for name in columns)
KEYS = ("point", "run", "config")
OPTIONAL = {"t_total": TEMPERATURE, "nominal_alpha": ANGLE, "nominal_mach": NUMBER}


@dataclass(frozen=True, slots=True, kw_only=True)
class Roles:
    """Columns of the points table by what they are; ``factor`` and ``shift`` (k,) turn numbers into SI.

    Number columns are alpha, the channels, the optional ones, then the taps that have a column; ``tap_at``
    are the places of those among all taps.
    """

    alpha: Column
    channels: tuple[Column, ...]
    optional: tuple[Column, ...]
    taps: tuple[Column, ...]
    tap_at: NDArray[np.int64]
    groups: tuple[Column, ...]
    factor: Array
    shift: Array
    sound: bool
    """Whether every unit was understood, so that numbers can be judged."""

    @property
    def numbers(self) -> tuple[Column, ...]:
        """Number columns in order."""
        return (self.alpha, *self.channels, *self.optional, *self.taps)

    @property
    def tap_start(self) -> int:
        """Where taps begin among the number columns."""
        return 1 + len(self.channels) + len(self.optional)

    def si(self, numbers: Array) -> Array:
        """Numbers (R, k) of the table in SI units."""
        return np.asarray(self.factor * (numbers + self.shift))


def find_roles(
    table: Table, taps: TapList | None, arrangement: Arrangement | None, findings: Findings
) -> Roles | None:
    """The columns by role; what is missing, without unit or of the wrong kind is noted."""
    point = need(table, "point", findings)
    alpha = need(table, "alpha", findings)
    channels = [_channel(table, name, taps, arrangement, findings) for name in _channels(arrangement)]
    optional = [column for name in OPTIONAL if (column := table.column(name))]
    names = taps.names if taps else ()
    tap_columns = _tap_columns(table, taps, findings)
    tap_at = np.array([names.index(column.name) for column in tap_columns], dtype=np.int64)
    groups = _groups(table, arrangement, names)
    _warn_of_strays(table, names, arrangement, findings)
    dimension = NUMBER if arrangement and arrangement.pressures == COEFFICIENT else PRESSURE
    if alpha is None or point is None:
        return None
    found = tuple(column for column in channels if column)
    before = len(findings)
    units = [column_unit(table, alpha, ANGLE, findings)]
    units += [
        column_unit(table, column, NUMBER if column.name == "mach" else PRESSURE, findings)
        for column in found
    ]
    units += [column_unit(table, column, OPTIONAL[column.name], findings) for column in optional]
    kind = f"{table.file}, columns of taps"
    units += [column_unit(table, column, dimension, findings, kind) for column in tap_columns]
    return Roles(
        alpha=alpha, channels=found, optional=tuple(optional), taps=tuple(tap_columns), tap_at=tap_at,
        groups=(point, *groups), factor=np.array([unit.factor for unit in units]),
        shift=np.array([unit.shift for unit in units]), sound=len(findings) == before,
    )  # fmt: skip


def _channel(
    table: Table, name: str, taps: TapList | None, arrangement: Arrangement | None, findings: Findings
) -> Column | None:
    """The column of a channel; a misspelt reference may be a word of the campaign file or a column."""
    why = _why(name, arrangement)
    found = table.column(name)
    if found is not None or arrangement is None or name != arrangement.reference:
        return found or need(table, name, findings, why)
    taken = {*STANDARD, *(taps.names if taps else ())}
    near = nearest(name, ["static", "total", "vacuum", *(set(table.names) - taken)])
    do = 'add the column, or write pressures = "relative to static", "... total" or "... vacuum"'
    if near:
        do = f'write pressures = "relative to {near}", or add the column {name}'
    findings.add(table.file, f"needs the column {name} ({why})", "none of that name", do)
    return None


def _channels(arrangement: Arrangement | None) -> Sequence[str]:
    return arrangement.columns if arrangement else ()


def _why(name: str, arrangement: Arrangement | None) -> str:
    if arrangement is None:
        return ""
    if name == arrangement.reference:
        return f'readings are "relative to {name}"'
    return f'the stream is from "{arrangement.stream}"'


def _tap_columns(table: Table, taps: TapList | None, findings: Findings) -> list[Column]:
    """Columns of the taps in order of the tap table; an excluded tap needs none."""
    if taps is None:
        return []
    found = []
    for name, excluded in zip(taps.names, taps.excluded.tolist(), strict=True):
        column = table.column(name) if name not in STANDARD else None
        if column is not None:
            found.append(column)
        elif not excluded and name not in {"", *STANDARD}:
            findings.add(
                table.file, f"needs the column {name} (a tap of {taps.table.file})", "none of that name",
                f"add the column {name}, or list the tap in taps.excluded",
                kind=f"{table.file}, columns of taps",
            )  # fmt: skip
    _warn_of_odd_units(table, found, findings)
    return found


def _warn_of_odd_units(table: Table, columns: Sequence[Column], findings: Findings) -> None:
    """A few taps in another unit than the rest are legal, and seldom meant."""
    usual, count = Counter(column.unit for column in columns).most_common(1)[0] if columns else ("", 0)
    odd = [f"{column.name} [{column.unit}]" for column in columns if column.unit != usual]
    if odd and count > 2 * len(odd):
        findings.warn(
            f"{table.file}: taps in another unit than the others, which are in {usual}: {listed(odd)}"
        )


def _groups(table: Table, arrangement: Arrangement | None, taps: Sequence[str]) -> list[Column]:
    """Columns that name groups of points: those without unit that are nothing else."""
    known = {"point", "alpha", *OPTIONAL, *CHANNELS, *_channels(arrangement), *taps}
    return [column for column in table.columns if column.name not in known and not column.unit]


def _warn_of_strays(
    table: Table, taps: Sequence[str], arrangement: Arrangement | None, findings: Findings
) -> None:
    """Warn of columns that look like readings of a tap which the tap table does not have."""
    known = {"alpha", *KEYS, *OPTIONAL, *CHANNELS, *_channels(arrangement), *taps}
    stems = {re.sub(r"\d+", "0", name) for name in taps if re.search(r"\d", name)}
    stray = [
        column.name
        for column in table.columns
        if column.name not in known and (_is_pressure(column) or re.sub(r"\d+", "0", column.name) in stems)
    ]
    if stray and taps:
        what = (
            "columns that are no taps of the tap table are"
            if len(stray) > 1
            else "a column that is no tap is"
        )
        findings.warn(f"{table.file}: {what} not used: {listed(stray)}")


def _is_pressure(column: Column) -> bool:
    try:
        return bool(column.unit) and unit(column.unit).dimension == PRESSURE
    except RuleError:
        return False
