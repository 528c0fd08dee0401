"""The tap table becomes taps placed on the contour."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import nan

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.contour import Contour
from tapband.files.acts import Arrangement
from tapband.files.contours import frozen, in_lengths
from tapband.files.faults import Findings, nearest, offer, shown
from tapband.files.folder import Folder
from tapband.files.model import TapsPart
from tapband.files.tables import Array, Block, Column, Table, column_unit, need
from tapband.files.tap_places import check_apart, place_taps
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
    placed = place_taps(table, block, places, columns.get("surface"), contour, chord, findings)
    s, upper = placed if placed is not None else (None, None)
    if s is not None:
        check_apart(table, block, names, s, excluded, findings)
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
        refused=np.concatenate([_refused(block) for block in blocks]),
    )


def _refused(block: Block) -> NDArray[np.bool_]:
    return np.zeros(block.numbers.shape, dtype=np.bool_) if block.refused is None else block.refused


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
