"""The contour table becomes the section: points in chords, in order round the section."""

from __future__ import annotations

from dataclasses import dataclass
from math import isfinite, nan

import numpy as np
from numpy.typing import NDArray

from tapband.files.faults import Findings, shown
from tapband.files.folder import Folder
from tapband.files.model import SectionPart
from tapband.files.tables import Array, Column, Table, column_unit, need
from tapband.files.units import LENGTH, quantity
from tapband.nouns.campaign import Section

FEWEST = 20
_LEAST, _MOST = 0.005, 20.0
"""Chords [m] outside of which a unit is more likely wrong than a model so small or so large."""
_EDGE = 0.1
"""How far from the rearmost point the ends of a contour may lie [chords]."""


def read_chord(part: SectionPart | None, folder: Folder) -> float:
    """The chord [m], NaN where it is not known."""
    if part is None:
        return nan
    where = folder.at("section.chord")
    chord = folder.findings.take(where, lambda: quantity(part.chord, LENGTH), nan)
    if chord <= 0.0:
        folder.findings.add(where, "must be above zero", shown(part.chord), 'write for example "400 mm"')
        return nan
    if not _LEAST <= chord <= _MOST:
        folder.findings.warn(
            f"{where}: {shown(part.chord)} is a chord of {chord:.4g} m; see whether its unit is right"
        )
    return chord


def read_section(part: SectionPart, chord: float, folder: Folder) -> Section | None:
    """The section, None where its contour cannot be used. Its chord may be NaN, with the fault noted."""
    findings = folder.findings
    before = len(findings)
    table = folder.table(part.contour, "section.contour")
    columns = table and [need(table, name, findings) for name in ("x", "y")]
    if not table or not columns or columns[0] is None or columns[1] is None:
        return None
    x_column, y_column = columns[0], columns[1]
    if bool(x_column.unit) != bool(y_column.unit):
        findings.add(
            table.file, "x and y must be stated alike", shown([_head(x_column), _head(y_column)]),
            "write a unit behind both, or behind none for fractions of the chord",
        )  # fmt: skip
    lines, x, y = _points(table, x_column, y_column, chord, findings)
    if len(findings) == before and np.all(np.isfinite(x)):
        _check_shape(table, lines, x, y, findings)
    if len(findings) > before or not np.all(np.isfinite(x)):
        return None
    span = float(x.max() - x.min())
    if abs(span - 1.0) > 0.02:
        findings.warn(
            f"{table.file}: the contour spans {span:.3f} chords; see whether section.chord is right"
        )
    return Section(
        x=frozen(x), y=frozen(y), chord=chord, contour_in_lengths=in_lengths(x_column),
        moment_centre=part.moment_centre, full_arm=part.moment_arm == "full",
    )  # fmt: skip


def frozen(values: Array) -> Array:
    """The array, read-only."""
    values.setflags(write=False)
    return values


def in_lengths(column: Column) -> bool:
    """Whether a place column is in lengths, not in fractions of the chord."""
    return column.unit not in FRACTIONS


FRACTIONS = frozenset({"", "-", "1", "c", "chord", "chords"})
"""What may stand as the unit of a fraction of the chord."""


def place_factor(table: Table, column: Column, chord: float, findings: Findings) -> float:
    """What turns the numbers of a place column into chords, NaN where the unit or the chord is not known."""
    if not in_lengths(column):
        return 1.0
    before = len(findings)
    factor = column_unit(table, column, LENGTH, findings).factor
    return factor / chord if len(findings) == before else nan


def _head(column: Column) -> str:
    return f"{column.name} [{column.unit}]" if column.unit else column.name


def _points(
    table: Table, x_column: Column, y_column: Column, chord: float, findings: Findings
) -> tuple[NDArray[np.int64], Array, Array]:
    """Lines (N,) and points (N,), (N,) of the contour [chords]."""
    x_factor, y_factor = (place_factor(table, column, chord, findings) for column in (x_column, y_column))
    blocks = list(table.blocks((x_column.index, y_column.index), (), findings))
    lines = np.concatenate([block.lines for block in blocks] or [np.empty(0, dtype=np.int64)])
    xy = np.concatenate([block.numbers for block in blocks] or [np.empty((0, 2))])
    empty = [np.column_stack((block.empty(0), block.empty(1))) for block in blocks]
    for row, column in np.argwhere(np.concatenate(empty)) if empty else ():
        name = (x_column, y_column)[column].name
        findings.add(
            table.at(int(lines[row]), name), "must be given at every point", "nothing", "write the number",
            kind=table.of(name),
        )  # fmt: skip
    return lines, x_factor * xy[:, 0], y_factor * xy[:, 1]


def _check_shape(table: Table, lines: NDArray[np.int64], x: Array, y: Array, findings: Findings) -> None:
    """Note what makes a contour unusable: too few points, wrong scale, wrong order, crossings."""
    if x.size < FEWEST:
        findings.add(table.file, f"must have at least {FEWEST} points", str(x.size), "add points")
        return
    span = float(x.max() - x.min())
    if isfinite(span) and not 0.5 < span < 2.0:
        findings.add(
            table.of("x"), "must span about one chord", f"{span:.4g} chords",
            'write the unit of x and y, such as "x [mm]", or correct section.chord',
        )  # fmt: skip
        return
    for end, word in ((0, "begin"), (-1, "end")):
        if x.max() - x[end] > _EDGE * span:
            findings.add(
                table.at(int(lines[end]), "x"), f"must {word} at a trailing edge", f"x = {x[end]:.4g}",
                "order the points from one trailing edge round the nose to the other",
            )  # fmt: skip
            return
    for row in np.flatnonzero((np.diff(x) == 0.0) & (np.diff(y) == 0.0)):
        findings.add(
            table.at(int(lines[row + 1])), "must differ from the point before it",
            f"({x[row]:.6g}, {y[row]:.6g}) twice", "remove one", kind=table.file,
        )  # fmt: skip
    area = abs(_area(x, y))
    if area < 1e-3 * span**2:
        findings.add(
            table.file,
            "must enclose an area",
            f"{area:.2g} square chords",
            "give both surfaces, upper and lower",
        )
        return
    crossing = _crossing(x, y)
    if crossing is not None:
        findings.add(
            table.at(int(lines[crossing[0]])), "must not cross itself",
            f"a crossing with the contour at {table.row_word} {lines[crossing[1]]}",
            "order the points from one trailing edge round the nose to the other",
        )  # fmt: skip


def _area(x: Array, y: Array) -> float:
    """Signed area of the closed polygon."""
    return 0.5 * float(np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y))


@dataclass(frozen=True, slots=True)
class _Segments:
    """Segments of a thinned contour and the index of the point each begins at."""

    begin: NDArray[np.int64]
    ax: Array
    ay: Array
    bx: Array
    by: Array


def _crossing(x: Array, y: Array) -> tuple[int, int] | None:
    """Indices of two points whose segments cross ahead of the last tenth of the chord, None where none do.

    A thinned contour of at most 400 segments is looked at: a gross crossing is meant, not a wiggle.
    """
    keep = np.unique(np.linspace(0, x.size - 1, min(x.size, 401)).astype(np.int64))
    seg = _Segments(keep[:-1], x[keep][:-1], y[keep][:-1], x[keep][1:], y[keep][1:])

    def side(px: Array, py: Array) -> Array:
        """Cross product (S, S) of segment i with the line to point j."""
        dx, dy = (seg.bx - seg.ax)[:, None], (seg.by - seg.ay)[:, None]
        return np.asarray(dx * (py[None, :] - seg.ay[:, None]) - dy * (px[None, :] - seg.ax[:, None]))

    split = side(seg.ax, seg.ay) * side(seg.bx, seg.by) < 0.0
    ahead = np.maximum(seg.ax, seg.bx) < x.max() - _EDGE
    both = np.triu(split & split.T, k=2) & ahead[:, None] & ahead[None, :]
    found = np.argwhere(both)
    return (int(seg.begin[found[0, 0]]), int(seg.begin[found[0, 1]])) if found.size else None
