"""Places of taps: on the contour by x with surface, x with y, or arc length."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from math import nan

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.contour import REACH, Contour
from tapband.files.contours import place_factor
from tapband.files.faults import Findings, offer, shown
from tapband.files.tables import Array, Block, Column, Table

_SAME = 1e-6
"""Distance below which two taps are at one place [chords]: under the rounding of any tap table."""
_PLACES = ("x", "y", "s", "surface")


def place_taps(
    table: Table, block: Block, places: Sequence[Column], surface: tuple[str, ...] | None,
    contour: Contour | None, chord: float, findings: Findings,
) -> tuple[Array, NDArray[np.bool_]] | None:  # fmt: skip
    """Arc length of each tap (n,) [chords] and which are upper; None where faults forbid."""
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
    empty = {column.name: block.empty(i) for i, column in enumerate(places)}
    _check_given(table, block, {name: empty[name] for name in way}, findings)
    upper = (
        _uppers(table, block, surface, findings) if surface else np.zeros(len(block.lines), dtype=np.bool_)
    )
    unknown = any(not np.isfinite(at[name]).all() for name in way)
    if contour is None or unknown or len(findings) > before:
        return None
    s = _on_contour(table, block, way, at, upper, contour, findings)
    _check_agreement(table, block, way, at, upper if surface else None, s, findings)
    if way != "x":
        upper = s > 0.0
    upper.setflags(write=False)
    return s, upper


def _check_given(table: Table, block: Block, empty: dict[str, NDArray[np.bool_]], findings: Findings) -> None:
    for name, rows in empty.items():
        for line in block.lines[rows].tolist():
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


def check_apart(
    table: Table,
    block: Block,
    names: tuple[str, ...],
    s: Array,
    excluded: NDArray[np.bool_],
    findings: Findings,
) -> None:
    """No two live taps are at one place."""
    order = [int(i) for i in np.argsort(s, kind="stable") if not excluded[i]]
    for a, b in pairwise(order):
        if abs(s[b] - s[a]) < _SAME:
            first, second = sorted((a, b))
            findings.add(
                table.at(int(block.lines[second])), "must not be at the place of another tap",
                f"{names[second]} at the place of {names[first]}", "correct one, or list it in taps.excluded",
            )  # fmt: skip
