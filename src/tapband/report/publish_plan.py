"""A plan made public: its tables and figures in one folder, whole or not at all."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from tapband.files import write

REPORT = "report.html"

if TYPE_CHECKING:
    import pandas as pd

    from tapband.report.plan_result import Plan


def publish_plan(
    plan: Plan, folder: Path, *, excel: bool = False, parquet: bool = False, figures: str | None = None
) -> Path:
    """Write the plan into ``folder`` and return it."""
    also: dict[str, Callable[[Path], None]] = {REPORT: partial(_write_page, plan)}
    if figures is not None:
        from tapband.report.figures_plan import plan_figure_jobs

        also |= plan_figure_jobs(plan.tables, figures)
    return write.write(Written.of(plan), folder, excel=excel, parquet=parquet, also=also)


def _write_page(plan: Plan, path: Path) -> None:
    from tapband.report.plan_page import plan_report

    text = plan_report(plan.tables, plan.meta, plan.notes, plan.campaign)
    path.write_text(text, encoding="utf-8", errors="replace")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Written:
    """The plan as it goes out: an allowance without limit is the word inf, apart from one that there is not."""

    tables: Mapping[str, pd.DataFrame]
    meta: Mapping[str, object]
    arrays: Mapping[str, np.ndarray]

    @classmethod
    def of(cls, plan: Plan) -> Written:
        tables = dict(plan.tables)
        frame = tables["allowances"].copy()
        for column in ("allowed", "headroom"):
            endless = np.isinf(np.asarray(frame[column], dtype=float))
            frame[column] = frame[column].astype(object).where(~endless, "inf")
        tables["allowances"] = frame
        return cls(tables=tables, meta=plan.meta, arrays=plan.arrays)
