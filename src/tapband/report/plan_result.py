"""A plan as a result: tables, remarks, and how it is written."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from numpy.typing import NDArray

from tapband.nouns.campaign import Campaign
from tapband.nouns.errors import QuestionError

if TYPE_CHECKING:
    import pandas as pd

    from tapband.questions.sizing import Sized


@dataclass(frozen=True, kw_only=True, eq=False)
class Plan:
    """What a test needs: tables by file name without ending, and remarks, the most important first.

    ``campaign`` is the campaign planned for, its points in it; ``sized`` holds the numbers behind the tables.
    """

    tables: Mapping[str, pd.DataFrame]
    meta: Mapping[str, Any]
    notes: tuple[str, ...]
    campaign: Campaign
    sized: Sized

    @property
    def arrays(self) -> Mapping[str, NDArray[Any]]:
        """Nothing beside the tables."""
        return {}

    @property
    def exit_status(self) -> int:
        """0 where the targets are met as declared or by some choice of options, else 1."""
        return int(not self.sized.can_be_met)

    def __getattr__(self, name: str) -> pd.DataFrame:
        """A table under its name."""
        tables = self.__dict__.get("tables", {})
        if name.startswith("_") or name not in tables:
            raise AttributeError(f"a plan has no table {name!r}")
        table: pd.DataFrame = tables[name]
        return table

    def table(self, name: str) -> pd.DataFrame:
        """A table by its name."""
        if name not in self.tables:
            raise QuestionError(f"{name}: this plan holds no such table; got {', '.join(self.tables)}")
        return self.tables[name]

    def write(self, folder: str | Path, *, excel: bool = False, figures: str | None = None) -> Path:
        """Write every table, ``results.json`` and the page; whole or not at all."""
        from tapband.report.publish_plan import publish_plan

        return publish_plan(self, Path(folder), excel=excel, figures=figures)

    def __repr__(self) -> str:
        """The remarks, one a line."""
        return "\n".join([f"tapband plan: {self.meta.get('title', '')}", *self.notes])

    def _repr_html_(self) -> str:
        from markupsafe import escape

        said = "".join(f"<li>{escape(note)}</li>" for note in self.notes)
        table = self.tables["allowances"].to_html(index=False, escape=True)
        return f"<p>{escape(str(self.meta.get('title', '')))}</p><ul>{said}</ul>{table}"


def plan_of(sized: Sized, meta: Mapping[str, Any]) -> Plan:
    """The plan of what was sized; ``meta`` is completed with what it says."""
    from tapband.files.frames_plan import plan_frames
    from tapband.questions.remarks import remarks

    notes = remarks(sized)
    whole = {**meta, "kind": "size", "notes": list(notes), "targets_can_be_met": sized.can_be_met}
    return Plan(
        tables=plan_frames(sized),
        meta={**whole, "exit_status": int(not sized.can_be_met)},
        notes=notes,
        campaign=sized.basis.campaign,
        sized=sized,
    )
