"""The commands and what each of them says of itself."""

from __future__ import annotations

import typer

from tapband.cli import comparing, planning, ranking, reading, reducing
from tapband.cli.options import Quiet, Version

app = typer.Typer(
    name="tapband",
    rich_markup_mode="markdown",
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["--help", "-h"], "max_content_width": 100},
    epilog="A first run: **tapband start demo**, then **tapband reduce demo/campaign.toml**",
)


@app.callback(invoke_without_command=True)
def _top(context: typer.Context, version: Version = False, quiet: Quiet = False) -> None:
    """Force coefficients from surface pressure taps, each with an interval you can defend.

    A campaign file (TOML) names the tables of contour, taps and readings, and declares every error source
    once: what it acts on, how large it is, and which taps and points share it. From that pair tapband
    computes the coefficients, their intervals by linearised propagation and by Monte Carlo, and what
    drives them.
    """
    context.obj = quiet
    if context.invoked_subcommand is None:
        typer.echo(context.get_help())
        raise typer.Exit(2)


for module in (reading, reducing, ranking, comparing, planning):
    module.add_to(app)
