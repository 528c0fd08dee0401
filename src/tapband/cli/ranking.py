"""``rank``: what drives the intervals of one point."""

from __future__ import annotations

import re
from typing import Annotated

import typer

from tapband.cli.options import CampaignFile, Quiet, Seed, Trials, Version
from tapband.nouns.errors import QuestionError


def _checked_method(text: str | None) -> str | None:
    if text is None or re.fullmatch(r"(salib:)?[1-9][0-9]*", text):
        number = int((text or "2").removeprefix("salib:"))
        power = number & (number - 1) == 0 and number >= 2
        if text is None or power:
            return text
    rule = "--sobol: must be a power of two, alone or after salib:"
    raise QuestionError(f'{rule}; got "{text}"; write --sobol 256 or salib:1024')


Point = Annotated[str, typer.Option("--point", metavar="P", help="POINT, or RUN/POINT where ambiguous.")]
Method = Annotated[
    str | None,
    typer.Option(
        callback=_checked_method, metavar="N|salib:N",
        help="Sobol' indices from N base samples, or by SALib's own sampling and analysis. Default: as many"
        " as their intervals need, with the linear model as control variate.",
    ),
]  # fmt: skip
Coefficient = Annotated[
    list[str] | None,
    typer.Option(
        metavar="C", help="cl, cd_pressure, cm (these by default), cn, ct, or one of them with _ref."
    ),
]


def add_to(app: typer.Typer) -> None:
    """Add the command."""
    app.command(epilog="Example: **tapband rank demo/campaign.toml --point R1/P05**")(rank)


def rank(
    context: typer.Context,
    campaign: CampaignFile,
    point: Point,
    sobol: Method = None,
    coefficient: Coefficient = None,
    trials: Trials = None,
    seed: Seed = None,
    quiet: Quiet = False,
    version: Version = False,
) -> None:
    """Rank what drives one point: groups, sources, taps, wiring.

    For each coefficient: the share of every group and source in the variance, its Sobol' indices, what the
    interval becomes with it halved or removed, the taps that carry 90 %, and the interval that the same
    errors would give if all taps were independent, all on one module, as wired, or interleaved.
    """
    from tapband import face

    results = face.rank(face.load(campaign), point, sobol=sobol, trials=trials, seed=seed)
    if not (quiet or context.obj):
        from tapband.cli.rank_summary import print_ranking
        from tapband.cli.terminal import output

        print_ranking(results, coefficient or (), output())
