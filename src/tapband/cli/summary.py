"""The summary a reduction prints: headline intervals, targets, and what to distrust, in 80 columns."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from tapband.cli.terminal import print_table
from tapband.files.write_columns import COEFFICIENTS
from tapband.files.write_text import one_line
from tapband.report.headline import Headline, Verdict, coefficients_of, headline, keys, verdicts
from tapband.report.rounding import decimals, fixed, plus_minus, significant

if TYPE_CHECKING:
    import pandas as pd
    from rich.console import Console
    from rich.table import Table

    from tapband.report.publish import Outcome

FIRST = ("cl", "cd_pressure", "cm")
MANY, ENDS = 14, 6
"""A campaign of more points shows this many at either end."""
NAME, LINES = 14, 4
"""Widest point name shown; most warnings shown."""


def print_summary(results: Outcome, folder: Path, console: Console) -> None:
    """Print the headline intervals of the points, the targets, the warnings and where the rest is."""
    frame = results.tables["coefficients"]
    shown = coefficients_of(frame)
    first = [name for name in FIRST if name in shown]
    others = [name for name in COEFFICIENTS if name in shown and name not in FIRST]
    level = results.meta.get("level", 0.95)
    kind = "forecast" if results.meta.get("kind") == "forecast" else "reduced"
    campaign = results.campaign
    title = one_line(campaign.title or campaign.name) if campaign else "results"
    _say(console, f"{title}: {len(frame)} points {kind}, {100 * float(str(level)):g} % intervals")
    print_table(console, _table(frame, first))
    if others and len(frame) <= ENDS:
        print_table(console, _table(frame, others))
    for line in [*_targets(results, frame), *_distrust(results, frame, shown)]:
        _say(console, line)
    _say(console, f"report: {folder / 'report.html'}")


def _say(console: Console, line: str) -> None:
    console.print(line, markup=False, soft_wrap=False)


def _table(frame: pd.DataFrame, names: Sequence[str]) -> Table:
    from rich import box
    from rich.table import Table
    from rich.text import Text

    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, padding=(0, 1))
    table.add_column("point", max_width=NAME, no_wrap=True, overflow="ellipsis")
    table.add_column("alpha", justify="right", no_wrap=True)
    for name in names:
        table.add_column(name, justify="right", no_wrap=True)
    columns = [_column(headline(frame, name)) for name in names]
    labels, alpha = keys(frame), np.asarray(frame["alpha"], dtype=float)
    rows = [[labels[i], f"{alpha[i]:.2f}", *(column[i] for column in columns)] for i in range(len(frame))]
    if len(rows) > MANY:
        left = len(rows) - 2 * ENDS
        rows = [*rows[:ENDS], [f"… {left} more", "", *([""] * len(names))], *rows[-ENDS:]]
    for label, *numbers in rows:
        table.add_row(Text(one_line(label)), *numbers)
    return table


def _column(shown: Headline) -> list[str]:
    def cell(i: int) -> str:
        if not shown.from_trials[i]:
            return plus_minus(shown.estimate[i], shown.half[i])
        places = decimals(shown.half[i])
        return f"{fixed(shown.low[i], places)}…{fixed(shown.high[i], places)}*"

    return [cell(i).replace("\N{MINUS SIGN}", "-") for i in range(len(shown.estimate))]


def _targets(results: Outcome, frame: pd.DataFrame) -> list[str]:
    labels = keys(frame)
    targets = results.campaign.plan.targets if results.campaign else ()
    return [_score(verdict, labels) for verdict in verdicts(frame, targets, results.tables.get("targets"))]


def _score(verdict: Verdict, labels: Sequence[str]) -> str:
    asked = f"target {verdict.target.coefficient} ± {verdict.target.expanded:g}"
    if not len(verdict.rows):
        return f"{asked}: no point in its range"
    missed = int((~verdict.met).sum())
    score = f"MISSED at {missed} of {len(verdict.rows)} points" if missed else "met"
    worst = int(np.argmax(np.where(np.isfinite(verdict.half), verdict.half, np.inf)))
    where = one_line(labels[verdict.rows[worst]])[:NAME]
    return f"{asked}: {score}; widest ± {significant(verdict.half[worst], 2)} at {where}"


def _distrust(results: Outcome, frame: pd.DataFrame, names: Sequence[str]) -> list[str]:
    lines = []
    unconfirmed = sum(int(headline(frame, name).from_trials.sum()) for name in names)
    if unconfirmed:
        lines.append(f"* not confirmed by Monte Carlo ({unconfirmed} in all): its own interval is shown")
    warnings = [one_line(str(line)) for line in _texts(results.meta.get("warnings"))]
    lines += [f"warning: {line}" for line in warnings[:LINES]]
    if len(warnings) > LINES:
        lines.append(f"… and {len(warnings) - LINES} more warnings in the report")
    undeclared = [one_line(str(line)).split(":")[0] for line in _texts(results.meta.get("undeclared"))]
    if undeclared:
        lines.append(f"not declared, so not in these intervals: {', '.join(undeclared)}")
    return lines


def _texts(value: object) -> list[object]:
    return list(value) if isinstance(value, list | tuple) else []
