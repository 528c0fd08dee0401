"""Results made public: every table, the report and figure files in one folder, whole or not at all."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Protocol

from tapband.files import write

if TYPE_CHECKING:
    from tapband.nouns.campaign import Campaign


class Outcome(write.Outcome, Protocol):
    """What a result holds, as far as showing it goes."""

    @property
    def campaign(self) -> Campaign:
        """The campaign that was reduced."""
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
) -> Path:
    """Write the results into ``folder`` and return it; ``figures`` is "svg", "png", "pdf" or None."""
    return write.write(results, folder, excel=excel, parquet=parquet)
