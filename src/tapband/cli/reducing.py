"""``reduce`` and ``forecast``: the whole chain, and what it leaves on disk and on the terminal."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from importlib import import_module
from pathlib import Path
from typing import TYPE_CHECKING

import typer

from tapband.cli.options import (
    CampaignFile,
    Excel,
    FigureKind,
    Figures,
    Out,
    Parquet,
    Quiet,
    Scheduler,
    Seed,
    Trials,
    Version,
)  # fmt: skip
from tapband.nouns.errors import QuestionError

if TYPE_CHECKING:
    from tapband.cli.terminal import ProgressLine
    from tapband.face import Results


def add_to(app: typer.Typer) -> None:
    """Add the commands."""
    app.command(epilog="Example: **tapband reduce demo/campaign.toml --figures svg**")(reduce)
    app.command(epilog="Example: **tapband forecast demo/campaign.toml --out planned**")(forecast)


def reduce(
    context: typer.Context,
    campaign: CampaignFile,
    out: Out = None,
    trials: Trials = None,
    seed: Seed = None,
    excel: Excel = False,
    parquet: Parquet = False,
    figures: Figures = None,
    scheduler: Scheduler = None,
    quiet: Quiet = False,
    version: Version = False,
) -> None:
    """Reduce a campaign: coefficients with intervals, their budget and ranking, tables and a report.

    Every interval is computed twice, linearised and by Monte Carlo, and the two are compared; where Monte
    Carlo does not confirm the linearised interval, its own is the headline and the report says so.

    Exit status: 0 done; 1 done, but a target is missed, a decision fails or a point is empty; 2 bad input,
    nothing written.
    """
    from tapband import face
    from tapband.cli.terminal import progress

    silent = quiet or bool(context.obj)
    loaded = face.load(campaign)
    target = _target(campaign, out, loaded.name)
    with _client(scheduler) as client, progress(silent) as line:
        results = face.reduce(loaded, trials=trials, seed=seed, progress=line, client=client)
        _write(results, target, excel, parquet, figures, line)
    _finish(results, target, silent)


def forecast(
    context: typer.Context,
    campaign: CampaignFile,
    out: Out = None,
    trials: Trials = None,
    seed: Seed = None,
    excel: Excel = False,
    parquet: Parquet = False,
    figures: Figures = None,
    scheduler: Scheduler = None,
    quiet: Quiet = False,
    version: Version = False,
) -> None:
    """Before a test: the pressures to expect, and the intervals the declared instruments would give.

    Takes the forecast part of the campaign file; readings are not needed yet. Writes the same tables and
    report as reduce, marked as a forecast.
    """
    from tapband import face
    from tapband.cli.terminal import progress

    silent = quiet or bool(context.obj)
    loaded = face.load(campaign)
    target = _target(campaign, out, loaded.name)
    with _client(scheduler) as client, progress(silent) as line:
        results = face.forecast(loaded, trials=trials, seed=seed, progress=line, client=client)
        _write(results, target, excel, parquet, figures, line)
    _finish(results, target, silent)


def _target(campaign: Path, out: Path | None, name: str) -> Path:
    from tapband.files.write_folder import check_target

    target = out if out is not None else campaign.parent / f"{name}-results"
    check_target(target)  # before the computation, not after it
    return target


@contextmanager
def _client(address: str | None) -> Iterator[object | None]:
    if address is None:
        yield None
        return
    try:
        cluster = import_module("distributed")
    except ImportError as error:
        need = "--scheduler: needs the packages dask and distributed; got none; install tapband[cluster]"
        raise QuestionError(need) from error
    try:
        client = cluster.Client(address, timeout=10)
    except (OSError, ValueError, TimeoutError) as error:
        rule = "--scheduler: must be the address of a running Dask scheduler"
        raise QuestionError(
            f'{rule}; got "{address}" ({error}); write one such as tcp://host:8786'
        ) from error
    with client:
        yield client


def _write(
    results: Results,
    target: Path,
    excel: bool,
    parquet: bool,
    figures: FigureKind | None,
    line: ProgressLine | None,
) -> None:
    from tapband.report.publish import publish

    kind = figures.value if figures else None
    publish(results, target, excel=excel, parquet=parquet, figures=kind, progress=line)


def _finish(results: Results, target: Path, silent: bool) -> None:
    if not silent:
        from tapband.cli.summary import print_summary
        from tapband.cli.terminal import output

        print_summary(results, target, output())
    raise typer.Exit(results.exit_status)
