"""The summary that ``size`` prints, in 80 columns."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from tapband.cli.terminal import print_table
from tapband.files.write_text import one_line

if TYPE_CHECKING:
    from rich.console import Console
    from rich.table import Table

    from tapband.face import Plan

LINES = 10
"""Most remarks shown."""
NAME = 21
NUMBER = 8
"""Width of a number: names give way to it."""


def print_plan(plan: Plan, folder: Path, console: Console) -> None:
    """Print the remarks, the allowances, the chosen options and where the rest is."""
    title = one_line(plan.campaign.title or plan.campaign.name)
    _say(console, f"Sizing. {title}")
    for note in plan.notes[:LINES]:
        _say(console, f"- {one_line(note)}")
    print_table(console, _allowances(plan))
    if "selection" in plan.tables and len(plan.tables["selection"]):
        print_table(console, _selection(plan))
    _say(console, f"tables: {folder}")


def _say(console: Console, line: str) -> None:
    console.print(line, markup=False, soft_wrap=False)


def _grid(*columns: tuple[str, bool]) -> Table:
    from rich import box
    from rich.table import Table

    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, padding=(0, 1))
    for name, number in columns:
        table.add_column(
            name, justify="right" if number else "left", max_width=NAME, min_width=NUMBER if number else None,
            no_wrap=True, overflow="ellipsis",
        )  # fmt: skip
    return table


def _allowances(plan: Plan) -> Table:
    from rich.text import Text

    frame = plan.tables["allowances"]
    table = _grid(("source", False), ("declared", True), ("allowed", True), ("unit", False), ("binds", False))
    for row in frame.to_dict("records"):
        allowed = float(row["allowed"])
        shown = "none" if np.isnan(allowed) else "any" if np.isinf(allowed) else f"{allowed:.3g}"
        point = str(row["binding_point"]).removeprefix("forecast/")
        binds = f"{row['binding_coefficient']} {point}".strip() or str(row["reason"])
        cells = [one_line(str(row["source"])), f"{float(row['declared']):.3g}", shown, str(row["unit"])]
        table.add_row(*(Text(cell.replace("\N{MINUS SIGN}", "-")) for cell in [*cells, one_line(binds)]))
    return table


def _selection(plan: Plan) -> Table:
    from rich.text import Text

    table = _grid(("slot", False), ("option", False), ("cost", True))
    for row in plan.tables["selection"].to_dict("records"):
        cells = (one_line(str(row["slot"])), one_line(str(row["option"])), f"{float(row['cost']):g}")
        table.add_row(*(Text(cell) for cell in cells))
    return table
