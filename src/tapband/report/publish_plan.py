"""A plan made public: its tables and figures in one folder, whole or not at all."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from tapband.files import write

if TYPE_CHECKING:
    import pandas as pd

    from tapband.report.plan_result import Plan


def publish_plan(
    plan: Plan, folder: Path, *, excel: bool = False, parquet: bool = False, figures: str | None = None
) -> Path:
    """Write the plan into ``folder`` and return it."""
    return write.write(Written.of(plan), folder, excel=excel, parquet=parquet)


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
