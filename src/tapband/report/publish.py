"""Results made public: every table, the report and figure files in one folder, whole or not at all."""

from __future__ import annotations

from collections.abc import Callable
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Protocol

from tapband.files import write
from tapband.nouns.errors import QuestionError

if TYPE_CHECKING:
    from tapband.nouns.campaign import Campaign
    from tapband.reduction import Reduced

REPORT = "report.html"


class Outcome(write.Outcome, Protocol):
    """What a result holds, as far as showing it goes."""

    @property
    def campaign(self) -> Campaign | None:
        """The campaign that was reduced; None for results read back."""
        ...

    @property
    def reduced(self) -> Reduced | None:
        """What the reduction computed beyond its tables, where that is still at hand."""
        ...

    @property
    def exit_status(self) -> int:
        """0, or 1 where a target is missed, a decision fails or a point is empty."""
        ...


def publish(
    results: Outcome,
    folder: str | Path,
    excel: bool = False,
    parquet: bool = False,
    figures: str | None = None,
    progress: Callable[[int, int, str], None] | None = None,
) -> Path:
    """Write the results into ``folder`` and return it; ``figures`` is "svg", "png", "pdf" or None."""
    if results.campaign is None:
        raise QuestionError("report: needs the campaign; got results read from a folder; reduce it again")
    also: dict[str, Callable[[Path], None]] = {REPORT: partial(_write_report, results, results.campaign)}
    if figures is not None:
        from tapband.report.figure_files import figure_jobs

        also |= figure_jobs(results, figures)
    return write.write(results, folder, excel=excel, parquet=parquet, also=also, progress=progress)


def _write_report(results: Outcome, campaign: Campaign, path: Path) -> None:
    from tapband.report.render import report

    path.write_text(report(results, campaign), encoding="utf-8", errors="replace")
