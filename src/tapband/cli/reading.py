"""``start``, ``check`` and ``schema``: commands that compute nothing."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from tapband.cli.options import CampaignFile, Quiet, Seed, Trials, Version

if TYPE_CHECKING:
    from tapband.nouns.campaign import Campaign


def add_to(app: typer.Typer) -> None:
    """Add the commands."""
    app.command(epilog="Example: **tapband start demo**")(start)
    app.command(epilog="Example: **tapband check demo/campaign.toml**")(check)
    app.command(epilog="Example: **tapband schema > campaign.schema.json**")(schema)


def start(
    context: typer.Context,
    folder: Annotated[Path, typer.Argument(metavar="DIR", help="The folder to make; it must not exist.")],
    quiet: Quiet = False,
    version: Version = False,
) -> None:
    """Write a complete starter campaign into a new folder.

    Its tables are small, its comments teach the campaign file, and it reduces as it stands: change one thing
    at a time and watch the intervals move.
    """
    from tapband.files.starter import write_starter

    write_starter(folder)
    if not (quiet or context.obj):
        typer.echo(f"{folder}: a starter campaign, explained in its campaign.toml")
        typer.echo(f"next: tapband reduce {folder / 'campaign.toml'}")


def check(
    context: typer.Context,
    campaign: CampaignFile,
    trials: Trials = None,
    seed: Seed = None,
    quiet: Quiet = False,
    version: Version = False,
) -> None:
    """Read a campaign and all its tables, compute nothing, and list every fault at once.

    Each fault says where it is, which rule it breaks, what stands there and what to write instead.
    """
    from tapband.face import load

    loaded = load(campaign)
    if not (quiet or context.obj):
        _say_what_was_read(campaign, loaded)


def _say_what_was_read(path: Path, campaign: Campaign) -> None:
    from tapband.files.write_text import printable

    points = len(campaign.points.names) if campaign.points else 0
    live = int((~campaign.taps.excluded).sum())
    found = f"{points} points, {live} taps, {len(campaign.sources)} sources"
    typer.echo(printable(f"{path}: no faults; {found}"))
    for warning in campaign.warnings:
        typer.echo(printable(f"warning: {warning}"))


def schema(version: Version = False, quiet: Quiet = False) -> None:
    """Print the JSON Schema of the campaign file, for editors that complete and check while you type."""
    import json

    from tapband.files.schema import schema as campaign_schema

    typer.echo(json.dumps(campaign_schema(), indent=2, ensure_ascii=False))
