"""The points table becomes test points: rows of one key are its samples, their means stand for it."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import suppress
from dataclasses import dataclass, field
from itertools import groupby
from math import pi

import numpy as np
from numpy.typing import NDArray

from tapband.files.acts import Arrangement
from tapband.files.contours import frozen
from tapband.files.faults import Findings
from tapband.files.folder import Folder
from tapband.files.means import Means
from tapband.files.point_columns import Roles, find_roles
from tapband.files.stream_checks import check_stream
from tapband.files.tables import Array, Block, BrokenTableError, Table
from tapband.files.taps import FEWEST, TapList
from tapband.nouns.campaign import Points, Rows
from tapband.nouns.errors import Fault, InputError

KEEP = 4_000_000
"""Numbers up to which the rows of a table stay in memory; a longer table is read again when asked for."""

Key = tuple[str, str]


@dataclass(frozen=True, slots=True, kw_only=True)
class PointList:
    """What the rest of a campaign is checked against: names, groups, and the line each point begins at."""

    table: Table
    names: tuple[str, ...]
    runs: tuple[str, ...]
    lines: tuple[int, ...]
    alpha: Array
    groups: Mapping[str, tuple[str, ...]]
    varying: Mapping[str, int]
    """Columns that change within a point, and the line where one first does."""
    points: Points | None


@dataclass(slots=True)
class _Keys:
    """Keys seen so far, with the line and the group cells of their first row."""

    at: dict[Key, int] = field(default_factory=dict)
    lines: list[int] = field(default_factory=list)
    cells: list[tuple[str, ...]] = field(default_factory=list)
    varying: dict[int, int] = field(default_factory=dict)
    refused: set[int] = field(default_factory=set)
    """Points with a cell whose fault is noted already."""

    def index(self, block: Block, run_at: int | None) -> NDArray[np.int64]:
        """Index of each row's point (R,), new keys added."""
        names = block.texts[0]
        runs: Sequence[str] = block.texts[run_at] if run_at is not None else [""] * len(names)
        found, sizes, row = [], [], 0
        for (key, cells), same in groupby(
            zip(zip(runs, names, strict=True), zip(*block.texts, strict=True), strict=True)
        ):
            index = self.at.setdefault(key, len(self.lines))
            if index == len(self.lines):
                self.lines.append(int(block.lines[row]))
                self.cells.append(cells)
            elif cells != self.cells[index]:
                self._note_change(cells, self.cells[index], int(block.lines[row]))
            found.append(index)
            sizes.append(sum(1 for _ in same))
            row += sizes[-1]
        return np.repeat(np.array(found, dtype=np.int64), sizes)

    def _note_change(self, cells: tuple[str, ...], first: tuple[str, ...], line: int) -> None:
        for column, (a, b) in enumerate(zip(cells, first, strict=True)):
            if a != b:
                self.varying.setdefault(column, line)


def read_points(
    name: str, taps: TapList | None, arrangement: Arrangement | None, folder: Folder
) -> PointList | None:
    """The test points, None where the table cannot be used."""
    findings = folder.findings
    before = len(findings)
    table = folder.table(name, "readings.table")
    roles = table and find_roles(table, taps, arrangement, findings)
    if not table or not roles:
        return None
    keys, means, kept = _gather(table, roles, taps, arrangement, findings)
    if not keys.lines:
        findings.add(table.file, "must have at least one point", "no row", "add a row for each test point")
        return None
    groups = {column.name: tuple(cell[i] for cell in keys.cells) for i, column in enumerate(roles.groups)}
    varying = {roles.groups[i].name: line for i, line in keys.varying.items()}
    runs, names = zip(*keys.at, strict=True)
    points = None
    found = means.means
    if taps is not None:
        readings = np.full((len(names), len(taps.names)), np.nan)
        readings[:, roles.tap_at] = found[:, roles.tap_start :]
        _check_live(table, keys, readings, taps, findings)
        if len(findings) == before:
            columns = {name: cells for name, cells in groups.items() if name not in varying}
            blocks = _block_source(table, roles, keys, means, kept, taps)
            points = _points(names, runs, columns, roles, found, readings, means.counts, blocks)
    return PointList(
        table=table,
        names=names,
        runs=runs,
        lines=tuple(keys.lines),
        alpha=found[:, 0],
        groups=groups,
        varying=varying,
        points=points,
    )


def _points(
    names: tuple[str, ...], runs: tuple[str, ...], columns: Mapping[str, tuple[str, ...]], roles: Roles,
    means: Array, readings: Array, counts: NDArray[np.int64], blocks: Callable[[], Iterator[Rows]] | None,
) -> Points:  # fmt: skip
    at = {
        column.name: frozen(means[:, i].copy()) for i, column in enumerate(roles.numbers[: roles.tap_start])
    }
    counts.setflags(write=False)
    return Points(
        names=names, runs=runs, columns=columns, alpha=at["alpha"],
        channels={column.name: at[column.name] for column in roles.channels}, readings=frozen(readings),
        t_total=at.get("t_total"), nominal_alpha=at.get("nominal_alpha"), nominal_mach=at.get("nominal_mach"),
        counts=counts, blocks=blocks,
    )  # fmt: skip


def _gather(
    table: Table, roles: Roles, taps: TapList | None, arrangement: Arrangement | None, findings: Findings
) -> tuple[_Keys, Means, list[tuple[NDArray[np.int64], Array]] | None]:
    """Every row once: keys, means, and the rows themselves where they are few."""
    keys, means = _Keys(), Means(len(roles.numbers))
    kept: list[tuple[NDArray[np.int64], Array]] | None = []
    size = 0
    for block in _blocks(table, roles, findings):
        point = keys.index(block, _run_at(roles))
        numbers = roles.si(block.numbers)
        if block.refused is not None:
            keys.refused.update(point[block.refused.any(axis=1)].tolist())
        _check_rows(table, roles, block, numbers, findings)
        if arrangement is not None and roles.sound:
            check_stream(table, roles, block, numbers, arrangement, findings)
        means.add(point, numbers)
        size += numbers.size
        if kept is not None:
            kept.append((point, numbers))
        if size > KEEP:
            kept = None
    return keys, means, kept


def _blocks(table: Table, roles: Roles, findings: Findings) -> Iterator[Block]:
    return table.blocks([c.index for c in roles.numbers], [c.index for c in roles.groups], findings)


def _run_at(roles: Roles) -> int | None:
    return next((i for i, column in enumerate(roles.groups) if column.name == "run"), None)


def _check_rows(table: Table, roles: Roles, block: Block, numbers: Array, findings: Findings) -> None:
    """Note rows without a name, an angle or a stream reading, and numbers no test has."""
    for row, name in enumerate(block.texts[0] if "" in block.texts[0] else ()):
        if not name:
            findings.add(
                table.at(int(block.lines[row]), "point"), "must name the point", "nothing", "write its name",
                kind=table.of("point"),
            )  # fmt: skip

    def note(column: int, bad: NDArray[np.bool_], rule: str, do: str) -> None:
        name = roles.numbers[column].name
        for row in np.flatnonzero(bad):
            got = "nothing" if np.isnan(block.numbers[row, column]) else f"{block.numbers[row, column]:g}"
            findings.add(table.at(int(block.lines[row]), name), rule, got, do, kind=table.of(name))

    for column in range(1 + len(roles.channels)):
        note(
            column,
            block.empty(column),
            "must be given in every row",
            "write the number or remove the row",
        )
    if not roles.sound:
        return
    rule = f"must lie within {_half_turn(roles)}"
    note(0, np.abs(numbers[:, 0]) > pi + 1e-9, rule, "correct the angle or its unit")
    for column, item in enumerate(roles.optional, start=1 + len(roles.channels)):
        values = numbers[:, column]
        if item.name == "t_total":
            note(column, values <= 0.0, "must be above absolute zero", "correct the temperature or its unit")
        elif item.name == "nominal_mach":
            note(
                column,
                (values <= 0.0) | (values >= 1.0),
                "must lie between 0 and 1",
                "correct the Mach number",
            )


def _half_turn(roles: Roles) -> str:
    """±180 deg in the unit of the angle column."""
    if roles.alpha.unit in {"deg", "degree", "degrees", "°"}:
        return f"±180 {roles.alpha.unit}"
    return f"±{pi / roles.factor[0]:.6g} {roles.alpha.unit} (±180 deg)"


def _check_live(table: Table, keys: _Keys, readings: Array, taps: TapList, findings: Findings) -> None:
    """Note points at which too few taps have a reading."""
    live = np.isfinite(readings) & ~taps.excluded
    sides = [(np.ones_like(taps.excluded), FEWEST, "")]
    if taps.upper is not None:
        sides += [(taps.upper, 2, " on the upper surface"), (~taps.upper, 2, " on the lower surface")]
    said = np.isin(np.arange(len(readings)), list(keys.refused))
    for side, fewest, words in sides:
        count = np.count_nonzero(live & side, axis=1)
        table_has = int(np.count_nonzero(side & ~taps.excluded))
        for row in np.flatnonzero((count < fewest) & ~said):
            if table_has < fewest:
                continue
            said[row] = True
            run, name = list(keys.at)[row]
            findings.add(
                f"{table.file}, {table.row_word} {keys.lines[row]}, point {f'{run}/{name}' if run else name}",
                f"must have readings at {fewest} or more taps{words}", str(count[row]),
                "give the readings or remove the point", kind=table.file,
            )  # fmt: skip


def _block_source(
    table: Table, roles: Roles, keys: _Keys, means: Means, kept: list[tuple[NDArray[np.int64], Array]] | None,
    taps: TapList,
) -> Callable[[], Iterator[Rows]] | None:  # fmt: skip
    """What streams every row in file order; None where every point has one row."""
    counts = means.counts
    if counts.max() == 1:
        return None
    total, size = int(counts.sum()), len(taps.names)

    def from_memory() -> Iterator[Rows]:
        for point, numbers in kept or ():
            yield _rows(roles, point, numbers, size)

    def from_file() -> Iterator[Rows]:
        findings, seen, run_at = Findings(), 0, _run_at(roles)
        with suppress(BrokenTableError):
            for block in _blocks(table, roles, findings):
                seen += len(block.lines)
                points = keys.index(block, run_at)
                if len(findings) or len(keys.lines) > counts.size:
                    break
                yield _rows(roles, points, roles.si(block.numbers), size)
        if len(findings) or seen != total:
            raise InputError([Fault(where=table.file, rule="changed while it was used", do="start again")])

    return from_file if kept is None else from_memory


def _rows(roles: Roles, point: NDArray[np.int64], numbers: Array, taps: int) -> Rows:
    """One block of rows; taps without a column are missing."""
    readings = np.full((len(point), taps), np.nan)
    readings[:, roles.tap_at] = numbers[:, roles.tap_start :]
    point = point.copy()
    point.setflags(write=False)
    return Rows(
        point=point, alpha=frozen(numbers[:, 0].copy()),
        channels={c.name: frozen(numbers[:, i].copy()) for i, c in enumerate(roles.channels, start=1)},
        readings=frozen(readings),
    )  # fmt: skip
