"""Options that several commands share, each described once."""

from __future__ import annotations

from enum import StrEnum
from pathlib import Path
from typing import Annotated

import typer

from tapband.nouns.errors import Fault, QuestionError
from tapband.nouns.monte_carlo import seed_fault, trials_fault


class FigureKind(StrEnum):
    """File kinds of ``--figures``."""

    SVG = "svg"
    PNG = "png"
    PDF = "pdf"


def _show_version(asked: bool) -> None:
    if asked:
        from tapband.nouns.version import VERSION

        typer.echo(f"tapband {VERSION}")
        raise typer.Exit


def _checked_trials(text: str | None) -> str | None:
    _refuse(None if text is None else trials_fault(text, "--trials"))
    return text


def _checked_seed(text: str) -> int:
    try:
        number: int | str = int(text)
    except ValueError:  # no number, or of more digits than Python reads
        number = text
    _refuse(seed_fault(number, "--seed"))
    return int(number)


def _refuse(fault: Fault | None) -> None:
    if fault is not None:
        raise QuestionError(str(fault))


CampaignFile = Annotated[Path, typer.Argument(metavar="CAMPAIGN", help="The campaign file (TOML).")]
Version = Annotated[
    bool, typer.Option("--version", callback=_show_version, is_eager=True, help="Print the version and stop.")
]
Quiet = Annotated[bool, typer.Option("--quiet", "-q", help="Print nothing but errors.")]
Trials = Annotated[
    str | None,
    typer.Option(
        callback=_checked_trials, metavar="auto|N|plain:N",
        help="Monte Carlo trials: as many as the tolerance asks, N, or N plain ones. Default: as declared.",
    ),
]  # fmt: skip
Seed = Annotated[
    int | None,
    typer.Option(
        parser=_checked_seed, metavar="N", help="Seed of the Monte Carlo draws. Default: as declared."
    ),
]
Out = Annotated[
    Path | None,
    typer.Option(
        metavar="DIR",
        help="Folder of the results. Default: CAMPAIGN-results beside the campaign, CAMPAIGN the name of its file"
        " without the ending. An existing folder is replaced only if tapband wrote it; files of your own in it"
        " stay.",
    ),
]
Excel = Annotated[bool, typer.Option("--excel", help="Also one workbook, a sheet a table (results.xlsx).")]
Parquet = Annotated[bool, typer.Option("--parquet", help="Also every table as Parquet.")]
Figures = Annotated[FigureKind | None, typer.Option(help="Also every figure as a file, in folder figures.")]
Scheduler = Annotated[
    str | None,
    typer.Option(metavar="ADDRESS", help="Spread the points over the Dask cluster there (tcp://host:8786)."),
]
