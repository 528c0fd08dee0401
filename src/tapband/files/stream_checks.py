"""Whether the stream readings of a row can be those of a subsonic stream."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tapband.files.acts import Arrangement
from tapband.files.faults import Findings
from tapband.files.point_columns import Roles
from tapband.files.tables import Array, Block, Table

SONIC = 1.2**3.5
"""Total over static pressure at Mach 1 (γ = 1.4). *Source* NACA Report 1135, equation 44 (from memory)."""


def check_stream(
    table: Table, roles: Roles, block: Block, numbers: Array, arrangement: Arrangement, findings: Findings
) -> None:
    """Note rows (R, k) whose stream is not subsonic and moving, with both readings that say so."""
    names = [column.name for column in roles.channels]
    at = {name: numbers[:, 1 + i] for i, name in enumerate(names)}
    needed = arrangement.stream_columns

    def note(bad: NDArray[np.bool_], rule: str, columns: tuple[str, ...], do: str) -> None:
        for row in np.flatnonzero(bad):
            got = ", ".join(_cell(roles, block, int(row), name) for name in columns)
            findings.add(table.at(int(block.lines[row])), rule, got, do, kind=table.file)

    def above_zero(name: str) -> None:
        if name in at:
            note(at[name] <= 0.0, f"{name} must be above zero", (name,), "correct the reading or its unit")

    above_zero("p_static")
    above_zero(arrangement.reference)
    if not set(needed) <= set(at):
        return
    slow, units = "the stream must be slower than sound", "correct the readings or their units"
    both = "correct the readings, or their columns if they are swapped"
    if arrangement.stream == "total and static":
        total, static = at["p_total"], at["p_static"]
        note(total <= static, "p_total must be above p_static", ("p_total", "p_static"), both)
        note((static > 0.0) & (total >= SONIC * static), slow, ("p_total", "p_static"), units)
    elif arrangement.stream == "difference and static":
        above_zero("p_difference")
        static, difference = at["p_static"], at["p_difference"]
        fast = (static > 0.0) & (static + difference >= SONIC * static)
        note(fast, slow, ("p_difference", "p_static"), units)
    else:
        above_zero("q")
        note(
            (at["mach"] <= 0.0) | (at["mach"] >= 1.0),
            "mach must lie between 0 and 1",
            ("mach",),
            "correct it",
        )


def _cell(roles: Roles, block: Block, row: int, name: str) -> str:
    """A cell as it stands in the table."""
    for i, column in enumerate(roles.numbers[: roles.tap_start]):
        if column.name == name:
            return f"{name} {block.numbers[row, i]:.8g}" + (f" {column.unit}" if column.unit else "")
    return name
