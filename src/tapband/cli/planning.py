"""``size``: what a test needs, before it."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import typer

from tapband.cli.options import (
    CampaignFile,
    Excel,
    Figures,
    Out,
    Parquet,
    Quiet,
    Seed,
    Trials,
    Version,
)

if TYPE_CHECKING:
    from tapband.face import Plan


def add_to(app: typer.Typer) -> None:
    """Add the command."""
    app.command(epilog="Example: **tapband size demo/campaign.toml --out plan**")(size)


def size(
    context: typer.Context,
    campaign: CampaignFile,
    out: Out = None,
    trials: Trials = None,
    seed: Seed = None,
    excel: Excel = False,
    parquet: Parquet = False,
    figures: Figures = None,
    quiet: Quiet = False,
    version: Version = False,
) -> None:
    """Before a test: how good each instrument must be, which to buy, how to wire it, where to put the taps.

    Takes the targets, slots, layout and wiring of the campaign file, at the points of its forecast (without
    one, at its readings). Answers: how large each source may become before a target fails; the cheapest
    options that meet every target, and every efficient trade of cost against interval; the range each channel
    will see; wiring, tap places and averaging times where they are asked for.

    Exit status: 0 the targets can be met; 1 done, but no choice meets them; 2 bad input, nothing written.
    """
    from tapband import face
    from tapband.cli.terminal import progress
    from tapband.files.write_folder import check_target
    from tapband.report.publish_plan import publish_plan

    silent = quiet or bool(context.obj)
    loaded = face.load(campaign)
    target = out if out is not None else campaign.parent / f"{loaded.name}-results"
    check_target(target)  # before the computation, not after it
    stated = loaded.intervals
    intervals = replace(stated, trials=trials or stated.trials, seed=stated.seed if seed is None else seed)
    with progress(silent) as line:
        plan = face.size(replace(loaded, intervals=intervals), progress=line)
        publish_plan(plan, target, excel=excel, parquet=parquet, figures=figures.value if figures else None)
    if not silent:
        _say(plan, target)
    raise typer.Exit(plan.exit_status)


def _say(plan: Plan, target: Path) -> None:
    """The remarks, then the allowances and the options, in 80 columns."""
    from tapband.cli.plan_summary import print_plan
    from tapband.cli.terminal import output

    print_plan(plan, target, output())
