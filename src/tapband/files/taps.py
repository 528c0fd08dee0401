"""The tap table becomes taps placed on the contour."""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import nan

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.contour import REACH, Contour
from tapband.files.acts import Arrangement
from tapband.files.contours import frozen, in_lengths, place_factor
from tapband.files.faults import Findings, nearest, offer, shown
from tapband.files.folder import Folder
from tapband.files.model import TapsPart
from tapband.files.tables import Array, Block, Column, Table, column_unit, need
from tapband.files.units import PRESSURE
from tapband.nouns.campaign import Section, Taps
from tapband.nouns.errors import TapbandError

FEWEST = 5
_SAME = 1e-6
"""Distance below which two taps are at one place [chords]: under the rounding of any tap table."""
_PLACES = ("x", "y", "s", "surface")


@dataclass(frozen=True, slots=True, kw_only=True)
class TapList:
    """What the rest of a campaign is checked against even where taps cannot be placed."""

    table: Table
    lines: tuple[int, ...]
    names: tuple[str, ...]
    excluded: NDArray[np.bool_]
    full_scale: Array
    columns: Mapping[str, tuple[str, ...]]
    upper: NDArray[np.bool_] | None


def read_taps(
    part: TapsPart, section: Section | None, chord: float, arrangement: Arrangement | None, folder: Folder
) -> tuple[TapList | None, Taps | None]:
    """The tap list and the placed taps, either None where the table cannot be used so far."""
    findings = folder.findings
    before = len(findings)
    table = folder.table(part.table, "taps.table")
    tap_column = table and need(table, "tap", findings)
    if not table or not tap_column:
        return None, None
    texts = [column for column in table.columns if column.name not in {"x", "y", "s", "full_scale"}]
    places = [column for name in ("x", "y", "s") if (column := table.column(name))]
    scale = table.column("full_scale")
    block = _whole(table, [*places, *([scale] if scale else [])], texts, findings)
    columns = {column.name: tuple(cells) for column, cells in zip(texts, block.texts, strict=True)}
    names = columns.pop("tap")
    _check_names(table, block, names, arrangement, findings)
    excluded = _excluded(part, names, folder)
    full_scale = frozen(_full_scales(table, scale, block, findings))
    contour = _contour(section, part, folder)
    s = _place(table, block, places, columns.get("surface"), contour, chord, findings)
    upper = None if s is None else s > 0.0
    if s is not None:
        _check_places(table, block, names, s, excluded, findings)
    _check_live(names, excluded, upper, folder, part)
    found = TapList(
        table=table, lines=tuple(block.lines.tolist()), names=names, excluded=excluded, full_scale=full_scale,
        columns=columns, upper=upper,
    )  # fmt: skip
    if s is None or contour is None or upper is None or len(findings) > before:
        return found, None
    x, y = contour.point(s)
    taps = Taps(
        names=names, s=frozen(s), x=frozen(x), y=frozen(y), upper=upper, excluded=excluded,
        full_scale=full_scale, columns=columns,
        placed_in_lengths=any(in_lengths(column) for column in places),
    )  # fmt: skip
    return found, taps


def _contour(section: Section | None, part: TapsPart, folder: Folder) -> Contour | None:
    """The contour that taps are placed on."""
    if section is None:
        return None
    try:
        return Contour.of(section.x, section.y)
    except (TapbandError, ValueError) as error:
        folder.findings.add(
            folder.at("section.contour"), "has a contour that no curve goes through", shown(str(error)),
            "check its points",
        )  # fmt: skip
        return None


def _whole(table: Table, numbers: Sequence[Column], texts: Sequence[Column], findings: Findings) -> Block:
    """The whole table as one block."""
    asked = [column.index for column in numbers], [column.index for column in texts]
    blocks = list(table.blocks(*asked, findings))
    if not blocks:
        return Block(
            lines=np.empty(0, dtype=np.int64),
            numbers=np.empty((0, len(numbers))),
            texts=tuple([] for _ in texts),
        )
    return Block(
        lines=np.concatenate([block.lines for block in blocks]),
        numbers=np.concatenate([block.numbers for block in blocks]),
        texts=tuple([cell for block in blocks for cell in block.texts[i]] for i in range(len(texts))),
    )


def _check_names(
    table: Table, block: Block, names: tuple[str, ...], arrangement: Arrangement | None, findings: Findings
) -> None:
    """Every tap has a name of its own that no other column of the points table bears."""
    taken = {"point", "run", "config", "alpha", "t_total", "nominal_alpha", "nominal_mach"}
    taken |= set(arrangement.columns if arrangement else ())
    seen: dict[str, int] = {}
    for name, line in zip(names, block.lines.tolist(), strict=True):
        if not name:
            findings.add(
                table.at(line, "tap"), "must have a name", "nothing", "write the name of its reading column"
            )
        elif name in seen:
            findings.add(
                table.at(line, "tap"), "must be a name of its own",
                f"{shown(name)}, which {table.row_word} {seen[name]} has too", "rename one",
            )  # fmt: skip
        elif name in taken:
            findings.add(
                table.at(line, "tap"), "must not be the name of another column of the points table",
                shown(name), "rename the tap",
            )  # fmt: skip
        seen.setdefault(name, line)


def _excluded(part: TapsPart, names: tuple[str, ...], folder: Folder) -> NDArray[np.bool_]:
    for index, name in enumerate(part.excluded):
        if name not in names:
            where = folder.at(f"taps.excluded[{index + 1}]")
            near = nearest(name, names)
            folder.findings.add(
                where, f"must be a tap of {part.table}", shown(name),
                offer(name, names) if near else "remove it",
            )  # fmt: skip
    excluded = np.array([name in part.excluded for name in names], dtype=np.bool_)
    excluded.setflags(write=False)
    return excluded


def _full_scales(table: Table, column: Column | None, block: Block, findings: Findings) -> Array:
    """Full scales (n,) [Pa], NaN where none is stated."""
    if column is None:
        return np.full(len(block.lines), nan)
    values = block.numbers[:, -1] * column_unit(table, column, PRESSURE, findings).factor
    for row in np.flatnonzero(values <= 0.0):
        findings.add(
            table.at(int(block.lines[row]), "full_scale"), "must be above zero",
            f"{block.numbers[row, -1]:g}", "write the largest magnitude of the range",
            kind=table.of("full_scale"),
        )  # fmt: skip
    return np.asarray(values)


def _place(
    table: Table, block: Block, places: Sequence[Column], surface: tuple[str, ...] | None,
    contour: Contour | None, chord: float, findings: Findings,
) -> Array | None:  # fmt: skip
    """Arc length of each tap (n,) [chords], None where it cannot be had."""
    at = {
        column.name: block.numbers[:, i] * place_factor(table, column, chord, findings)
        for i, column in enumerate(places)
    }
    way = "xy" if {"x", "y"} <= set(at) else "x" if "x" in at and surface else "s" if "s" in at else ""
    if not way:
        got = shown([name for name in _PLACES if table.column(name)])
        do = "add surface (upper or lower) or y" if "x" in at else "add x with surface, x with y, or s"
        findings.add(table.file, "must place the taps by x with surface, x with y, or s", got, do)
        return None
    before = len(findings)
    given = {column.name: block.numbers[:, i] for i, column in enumerate(places)}
    _check_given(table, block, {name: given[name] for name in way}, findings)
    upper = (
        _uppers(table, block, surface, findings) if surface else np.zeros(len(block.lines), dtype=np.bool_)
    )
    unknown = any(not np.isfinite(at[name]).all() for name in way)
    if contour is None or unknown or len(findings) > before:
        return None
    s = _on_contour(table, block, way, at, upper, contour, findings)
    _check_agreement(table, block, way, at, upper if surface else None, s, findings)
    return s


def _check_given(table: Table, block: Block, at: dict[str, Array], findings: Findings) -> None:
    for name, values in at.items():
        for line in block.lines[np.isnan(values)].tolist():
            findings.add(
                table.at(line, name), "must be given for every tap", "nothing", "write the number",
                kind=table.of(name),
            )  # fmt: skip


def _uppers(table: Table, block: Block, surface: tuple[str, ...], findings: Findings) -> NDArray[np.bool_]:
    """Which taps are on the upper surface (n,)."""
    for word, line in zip(surface, block.lines.tolist(), strict=True):
        if word not in {"upper", "lower"}:
            findings.add(
                table.at(line, "surface"), 'must be "upper" or "lower"', shown(word) if word else "nothing",
                offer(word, ("upper", "lower")), kind=table.of("surface"),
            )  # fmt: skip
    return np.array([word == "upper" for word in surface], dtype=np.bool_)


def _on_contour(
    table: Table, block: Block, way: str, at: dict[str, Array], upper: NDArray[np.bool_], contour: Contour,
    findings: Findings,
) -> Array:  # fmt: skip
    """Arc length of each tap (n,); what lies off the contour is noted."""
    if way == "xy":
        s, distance = contour.place_xy(at["x"], at["y"])
        off = distance > REACH
    elif way == "x":
        s = contour.place_x(at["x"], upper)
        off, distance = np.isnan(s), np.full(s.shape, nan)
    else:
        s, distance = at["s"], np.maximum(at["s"] - contour.s_upper, contour.s_lower - at["s"])
        off = distance > REACH
        s = np.clip(s, contour.s_lower, contour.s_upper)
    for row in np.flatnonzero(off):
        place = ", ".join(f"{name} = {at[name][row]:.6g}" for name in way)
        far = f", {distance[row]:.2g} chords away" if np.isfinite(distance[row]) else ""
        findings.add(
            table.at(int(block.lines[row])), f"must lie within {REACH} chords of the contour",
            place + far, "correct the place or the contour", kind=table.file,
        )  # fmt: skip
    return s


def _check_agreement(
    table: Table, block: Block, way: str, at: dict[str, Array], upper: NDArray[np.bool_] | None, s: Array,
    findings: Findings,
) -> None:  # fmt: skip
    """Where a place is stated more than once, the statements agree."""
    if way != "x" and upper is not None:
        clear = np.abs(s) > 5.0 * REACH
        for row in np.flatnonzero(clear & np.isfinite(s) & (upper != (s > 0.0))):
            findings.add(
                table.at(int(block.lines[row]), "surface"), "must agree with the place of the tap",
                shown("upper" if upper[row] else "lower"), "correct the surface or the place",
                kind=table.file,
            )  # fmt: skip
    if way != "s" and "s" in at:
        for row in np.flatnonzero(np.abs(at["s"] - s) > 5.0 * REACH):
            findings.add(
                table.at(int(block.lines[row]), "s"), "must agree with x and the surface",
                f"s = {at['s'][row]:.6g} where x gives {s[row]:.6g}", "correct one, or remove the column s",
                kind=table.file,
            )  # fmt: skip


def _check_places(
    table: Table,
    block: Block,
    names: tuple[str, ...],
    s: Array,
    excluded: NDArray[np.bool_],
    findings: Findings,
) -> None:
    """No two live taps are at one place."""
    order = [int(i) for i in np.argsort(s, kind="stable") if not excluded[i]]
    for a, b in itertools.pairwise(order):
        if abs(s[b] - s[a]) < _SAME:
            first, second = sorted((a, b))
            findings.add(
                table.at(int(block.lines[second])), "must not be at the place of another tap",
                f"{names[second]} at the place of {names[first]}", "correct one, or list it in taps.excluded",
            )  # fmt: skip


def _check_live(
    names: tuple[str, ...], excluded: NDArray[np.bool_], upper: NDArray[np.bool_] | None, folder: Folder,
    part: TapsPart,
) -> None:  # fmt: skip
    """Enough taps are left to integrate over."""
    live = int(np.count_nonzero(~excluded))
    if live < FEWEST:
        folder.findings.add(
            part.table, f"must leave at least {FEWEST} taps that are not excluded", str(live), "add taps"
        )
    elif upper is not None:
        for side, word in ((upper, "upper"), (~upper, "lower")):
            count = int(np.count_nonzero(side & ~excluded))
            if count < 2:
                folder.findings.add(
                    part.table, f"must have at least two taps on the {word} surface", str(count), "add taps"
                )
