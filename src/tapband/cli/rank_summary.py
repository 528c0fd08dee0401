"""What ``rank`` prints: one block a coefficient, in 80 columns."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from tapband.cli.terminal import print_table
from tapband.files.write_text import one_line
from tapband.nouns.errors import QuestionError
from tapband.questions.rank_order import carriers
from tapband.questions.rank_taps import NOT_AT_A_TAP
from tapband.questions.rank_wiring import TOGETHER
from tapband.report.headline import headline, keys
from tapband.report.rounding import fixed, plus_minus, significant

if TYPE_CHECKING:
    import pandas as pd
    from rich.console import Console
    from rich.table import Table

    from tapband.face import Results

FIRST = ("cl", "cd_pressure", "cm")
NAME = 17
"""Widest name shown."""
SOURCES, TAPS, WIRED = 10, 12, 8
"""Most sources, taps and sources of tap pressure shown."""
PART = 0.9
LEAST = 0.001
"""Negative shares smaller than this go without a word."""
ASCII = str.maketrans({"\N{MINUS SIGN}": "-"})


def print_ranking(results: Results, wanted: Sequence[str], console: Console) -> None:
    """Print what drives the point: groups, sources, taps and wiring of each coefficient asked for."""
    frame = results.tables["coefficients"]
    chosen = _chosen(wanted, list(dict.fromkeys(results.tables["ranking"]["coefficient"].astype(object))))
    alpha = float(frame["alpha"].iloc[0])
    _say(console, one_line(str(results.meta.get("title") or results.meta.get("name"))))
    _say(console, f"what drives {one_line(keys(frame)[0])}, alpha {alpha:.2f} deg".translate(ASCII))
    for name in chosen:
        _coefficient(results, name, console)
    _screening(results.tables.get("screening"), console)
    notes = results.tables["wiring_comparison"].attrs.get("notes", ())
    for line in [*(f"not rewired: {note}" for note in notes), *results.warnings]:
        _say(console, one_line(str(line)))


def _chosen(wanted: Sequence[str], names: Sequence[str]) -> Sequence[str]:
    for name in wanted:
        if name not in names:
            rule = "--coefficient: must be a coefficient of the campaign"
            raise QuestionError(f'{rule}; got "{name}"; write one of {", ".join(names)}')
    return wanted or [name for name in FIRST if name in names]


def _say(console: Console, line: str) -> None:
    console.print(line, markup=False)


def _coefficient(results: Results, name: str, console: Console) -> None:
    shown = headline(results.tables["coefficients"], name)
    level = f"{100 * float(str(results.meta.get('level', 0.95))):g} %"
    if not np.isfinite(shown.estimate[0]):
        _say(console, f"\n{name} has no value at this point")
        return
    value = plus_minus(shown.estimate[0], shown.half[0]).translate(ASCII)
    groups = _rows(results.tables["ranking"], name)
    stands = float(groups["U"].iloc[0])
    doubt = " by Monte Carlo, the linearised one not confirmed" if shown.from_trials[0] else ""
    _say(console, f"\n{name} = {value} ({level}{doubt})")
    if stands == 0.0:
        _say(console, "no declared error acts on it")
        return
    _say(
        console,
        f"U = {significant(stands, 3)} linearised; with a group or source halved or removed U becomes:",
    )
    print_table(console, _shares(groups, "group"))
    for note in groups["note"]:
        if note:
            _say(console, f"  {note}")
    sources = _rows(results.tables["source_ranking"], name)
    if len(sources) > len(groups):
        print_table(console, _shares(sources.head(SOURCES), "source"))
    chord = results.campaign.section.chord if results.campaign else float("nan")
    _taps(_rows(results.tables["tap_ranking"], name), chord, console)
    wiring = results.tables["wiring_comparison"]
    rows = wiring[np.asarray(wiring["coefficient"].astype(object) == name)]
    if len(rows):
        print_table(console, _wiring(rows))


def _rows(frame: pd.DataFrame, name: str) -> pd.DataFrame:
    """The rows of a coefficient, best rank first."""
    return frame[np.asarray(frame["coefficient"].astype(object) == name)].sort_values("rank", kind="stable")


def _empty(*columns: str, widest: int = NAME) -> Table:
    from rich import box
    from rich.table import Table

    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, padding=(0, 1))
    for i, column in enumerate(columns):
        if i:
            table.add_column(column, justify="right", no_wrap=True)
        else:
            table.add_column(column, max_width=widest, no_wrap=True, overflow="ellipsis")
    return table


def _add(table: Table, name: object, *cells: str) -> None:
    from rich.text import Text

    table.add_row(Text(one_line(str(name))), *(cell.translate(ASCII) for cell in cells))


def _shares(rows: pd.DataFrame, word: str) -> Table:
    table = _empty(word, "share", "first order", "total", "halved", "removed")
    for row in _records(rows):
        _add(
            table, row["group"], _percent(row["linear_share"]),
            *(_index(row[key], row[f"{key}_ci"]) for key in ("first_order", "total")),
            *(significant(float(row[key]), 3) for key in ("U_halved", "U_removed")),
        )  # fmt: skip
    return table


def _index(value: Any, half: Any) -> str:
    return f"{fixed(float(value), 3)}±{fixed(float(half), 3)}" if np.isfinite(value) else "none"


def _percent(share: Any) -> str:
    return f"{100 * float(share):.1f} %"


def _taps(rows: pd.DataFrame, chord: float, console: Console) -> None:
    away = np.asarray(rows["tap"].astype(object) == NOT_AT_A_TAP)
    taps, rest = rows[~away], float(rows["share"][away].iloc[0])
    found = carriers(np.asarray(taps["share"], dtype=float), PART)
    if not found:
        _say(console, "no part of its variance enters at the taps")
        return
    picked = taps.iloc[found]
    named = [one_line(str(tap)) for tap in picked["tap"]]
    names = ", ".join(named[:TAPS]) + (f" and {len(named) - TAPS} more" if len(named) > TAPS else "")
    most = f"{100 * PART:g} % of that at {len(found)} of {len(taps)} taps"
    _say(console, f"taps: {_percent(1.0 - rest)} of the variance enters there, {most}: {names}")
    table = _empty("tap", "x", "weight", "share", "if lost", "per mm displaced")
    for row in _records(picked.head(TAPS)):
        _add(
            table, row["tap"], fixed(float(row["x"]), 4), significant(float(row["weight"]), 3),
            _percent(row["share"]), significant(float(row["if_lost"]), 2),
            significant(float(row["location_leverage"]) * 1e-3 / chord, 2),
        )  # fmt: skip
    print_table(console, table)
    negative = taps[np.asarray(taps["share"], dtype=float) < -LEAST]
    if len(negative):
        reasons = list(dict.fromkeys(str(note) for note in negative["note"]))
        _say(console, f"{len(negative)} taps have a share below -0.1 %: {one_line('; '.join(reasons))}")


def _wiring(rows: pd.DataFrame) -> Table:
    table = _empty("U if wired", "independent", "common", "as wired", "interleaved", "declared", widest=16)
    ways = [f"U_{key}" for key in ("independent", "common", "by_module", "interleaved")]
    values = rows[ways].to_numpy(dtype=float)
    spread = np.nanmax(values, axis=1) - np.nanmin(values, axis=1)
    spread[np.asarray(rows["source"].astype(object) == TOGETHER)] = np.inf
    for i in np.sort(np.argsort(-spread, kind="stable")[: WIRED + 1]).tolist():
        row = rows.iloc[i]
        cells = (significant(float(value), 3) for value in values[i])
        _add(table, row["source"], *cells, one_line(str(row["declared"])))
    return table


def _records(frame: pd.DataFrame) -> list[dict[str, Any]]:
    return [{str(key): value for key, value in row.items()} for row in frame.to_dict("records")]


def _screening(frame: pd.DataFrame | None, console: Console) -> None:
    if frame is None:
        return
    out = frame[np.asarray(frame["leave_out"].astype(object) == "yes")]
    names = list(dict.fromkeys(out["source"].astype(object)))
    count = len(set(frame["source"].astype(object)))
    if not names:
        _say(console, f"\nscreening: none of {count} sources may be left out")
        return
    worst = float(np.nanmax(np.asarray(out["loss"], dtype=float)))
    _say(
        console,
        f"\nscreening: {len(names)} of {count} sources may be left out together; no interval loses more than "
        f"{_percent(worst)}: {', '.join(one_line(str(name)) for name in names)}",
    )
