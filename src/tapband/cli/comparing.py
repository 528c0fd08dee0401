"""``compare``: the difference of two points, runs or configs, with what they share cancelled."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from tapband.cli.options import CampaignFile, Quiet, Seed, Trials, Version

if TYPE_CHECKING:
    import pandas as pd
    from rich.console import Console
    from rich.table import Table
    from rich.text import Text

FIRST = ("cl", "cd_pressure", "cm")
MANY, ENDS = 16, 7
"""A comparison of more pairs shows this many at either end."""
NAME = 11
"""Widest name of a point."""

Name = Annotated[str, typer.Argument(help="A point (POINT or RUN/POINT), a run or a config.")]
Within = Annotated[
    str | None,
    typer.Option(
        metavar='"0.1 deg"',
        help="Angles this close count as one; others are interpolated. Default: same_angle of the campaign.",
    ),
]
Folder = Annotated[
    Path | None,
    typer.Option(metavar="DIR", help="Also write differences.csv and results.json into this folder."),
]


def add_to(app: typer.Typer) -> None:
    """Add the command."""
    app.command(epilog="Example: **tapband compare demo/campaign.toml R1/P03 R2/P08**")(compare)


def compare(
    context: typer.Context,
    campaign: CampaignFile,
    a: Name,
    b: Name,
    within: Within = None,
    out: Folder = None,
    trials: Trials = None,
    seed: Seed = None,
    quiet: Quiet = False,
    version: Version = False,
) -> None:
    """Compare two points, two runs or two configs: A minus B, with what they share cancelled.

    Runs and configs are paired at equal angles, or interpolated in B where the angles differ. Each difference
    comes with its interval, the one it would have if errors were called independent between points, whether
    it is significant at the level of the campaign, and the sources that remain. A name that is both a point
    and a run is written run:NAME or point:NAME.
    """
    from tapband import face

    silent = quiet or bool(context.obj)
    if out is not None:
        _check_folder(out)
    results = face.compare(face.load(campaign), a, b, within=within, trials=trials, seed=seed)
    if out is not None:
        from tapband.files.write import write

        write(results, out)
    if not silent:
        from tapband.cli.terminal import output

        print_differences(results.tables["differences"], results.meta["level"], output())
        if out is not None:
            output().print(str(out / "differences.csv"), markup=False, soft_wrap=True)


def _check_folder(out: Path) -> None:
    """Refuse a folder that is not ours, or that holds the results of another command."""
    from tapband.files.read_results import read
    from tapband.files.write_folder import check_target, files_of
    from tapband.nouns.errors import Fault, InputError

    check_target(out)
    if files_of(out) is not None:
        kind = str(read(out).meta.get("kind", ""))
        if kind != "compare":
            rule = "must not hold results of another command, which differences would replace"
            raise InputError(
                [Fault(where=str(out), rule=rule, got=f"those of {kind}", do="choose another --out")]
            )


def print_differences(frame: pd.DataFrame, level: float, console: Console) -> None:
    """Print the differences, what remains in them, and the notes, in 80 columns."""
    from tapband.cli.terminal import print_table
    from tapband.files.write_text import one_line

    pairs = list(dict.fromkeys(zip(frame["a"], frame["b"], strict=True)))
    percent = f"{100 * level:g} %"
    if len(pairs) == 1:
        a, b = (one_line(str(name)) for name in pairs[0])
        _say(console, f"{a} minus {b}, {percent} intervals; * is significant")
        print_table(console, _one(frame))
    else:
        _say(console, f"{len(pairs)} pairs, A minus B, {percent} intervals; * is significant")
        print_table(console, _many(frame))
    for line in [*_findings(frame), *(str(note) for note in frame.attrs.get("notes", ()))]:
        _say(console, line)


def _say(console: Console, line: str) -> None:
    console.print(line, markup=False)


def _one(frame: pd.DataFrame) -> Table:
    table = _empty("coefficient", "difference", "if independent", "remaining")
    for row in _records(frame):
        if str(row["coefficient"]).endswith("_ref"):
            continue
        u = float(row["u_if_independent"]) * float(row["k"])
        table.add_row(
            str(row["coefficient"]), _interval(row), _half(u), _text(_shortened(str(row["remaining"])))
        )
    return table


def _records(frame: pd.DataFrame) -> list[dict[str, Any]]:
    return [{str(key): value for key, value in row.items()} for row in frame.to_dict("records")]


def _shortened(remaining: str) -> str:
    return ", ".join(remaining.split(", ")[:2])


def _many(frame: pd.DataFrame) -> Table:
    from tapband.files.write_text import one_line

    shown = [name for name in FIRST if name in set(frame["coefficient"])]
    table = _empty("A", "alpha", *shown)
    count = len(frame["coefficient"].unique())
    blocks = [frame.iloc[i : i + count] for i in range(0, len(frame), count)]
    left = len(blocks) - 2 * ENDS
    for i, block in enumerate(blocks):
        if len(blocks) > MANY and ENDS <= i < len(blocks) - ENDS:
            if i == ENDS:
                table.add_row(f"… {left} more")
            continue
        by_name = {str(row["coefficient"]): row for row in _records(block)}
        first = next(iter(by_name.values()))
        mark = "i" if first["interpolated"] == "yes" else ""
        cells = [_interval(by_name[name]) for name in shown]
        table.add_row(_text(one_line(str(first["a"]))), f"{first['alpha_a']:.2f}{mark}", *cells)
    return table


def _empty(*names: str) -> Table:
    from rich import box
    from rich.table import Table

    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, padding=(0, 1, 0, 0))
    for name in names:
        text = name in ("coefficient", "remaining")
        if name == "A":
            table.add_column(name, max_width=NAME, no_wrap=True, overflow="ellipsis")
        else:
            table.add_column(name, justify="left" if text else "right", no_wrap=name != "remaining")
    return table


def _text(value: str) -> Text:
    from rich.text import Text

    return Text(value)


def _interval(row: dict[str, Any]) -> str:
    from tapband.report.rounding import plus_minus

    text = plus_minus(row["difference"], row["U"])
    return text.replace("\N{MINUS SIGN}", "-") + ("*" if row["significant"] == "yes" else " ")


def _at_one_angle(row: dict[str, Any]) -> str:
    from tapband.report.rounding import plus_minus

    return plus_minus(row["equal_angle"], row["equal_angle_U"]).replace("\N{MINUS SIGN}", "-")


def _half(expanded: float) -> str:
    from tapband.report.rounding import decimals, fixed

    return f"± {fixed(expanded, decimals(expanded))}"


def _findings(frame: pd.DataFrame) -> list[str]:
    """What the table shows, in words."""
    import numpy as np

    lines = []
    if any(str(name).endswith("_ref") for name in frame["coefficient"]):
        lines.append("the coefficients at the reference Mach number are in the table that --out writes")
    ratio = np.asarray(frame["u_if_independent"] / frame["u"].where(frame["u"] > 0.0), dtype=float)
    if np.isfinite(ratio).any():
        worst = int(np.nanargmax(ratio))
        lines.append(
            f"called independent, the interval of {frame['coefficient'].iloc[worst]} would be up to "
            f"{ratio[worst]:.3g} times as wide"
        )
    turned = frame[(frame["significant"] == "yes") & (frame["equal_angle_significant"] == "no")]
    for name in dict.fromkeys(str(name) for name in turned["coefficient"]):
        if not name.endswith("_ref"):
            row = _records(turned[turned["coefficient"] == name])[0]
            lines.append(
                f"{name} of {row['a']}: significant as tested, but {_at_one_angle(row)} at one true angle"
            )
    return lines
