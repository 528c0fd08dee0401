"""Coefficients at the stated condition in the tables of the main job, apart by name from those measured."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pandas as pd

from tapband.files.frames import of_coefficient
from tapband.questions.stated import STATED, Stated
from tapband.reduction import Reduced


def with_stated_columns(
    tables: Mapping[str, pd.DataFrame], moved: Stated, reduced: Reduced
) -> dict[str, pd.DataFrame]:
    """The tables ``coefficients`` and ``budget`` with what is at the stated condition."""
    return {
        "coefficients": pd.concat([tables["coefficients"], _columns(moved, reduced)], axis=1),
        "budget": pd.concat([tables["budget"], _budget(moved, reduced)], ignore_index=True),
    }


def _columns(moved: Stated, reduced: Reduced) -> pd.DataFrame:
    """The nominal condition, and every column of every stated coefficient.

    ``C_stated_from_alpha`` and ``C_stated_from_mach`` are slope times u(alpha) and slope times u(M), the
    terms that the condition adds, each alone.
    """
    points = reduced.assembled.points
    columns: dict[str, object] = {}
    if points.nominal_alpha is not None:
        columns["nominal_alpha"] = np.degrees(points.nominal_alpha)
    if points.nominal_mach is not None:
        columns["nominal_mach"] = points.nominal_mach
    for j, name in enumerate(STATED):
        columns |= {f"{name}{ending}": value for ending, value in of_coefficient(moved, j).items()}
        columns[f"{name}_from_alpha"] = moved.from_alpha[:, j]
        columns[f"{name}_from_mach"] = moved.from_mach[:, j]
    return pd.DataFrame(columns)


def _budget(moved: Stated, reduced: Reduced) -> pd.DataFrame:
    """One row a point with a stated condition, stated coefficient and source."""
    points, loaded = reduced.assembled.points, reduced.assembled.loaded
    contribution = moved.linear.contribution
    families = moved.problem.families
    sources = len(families)
    kept = np.flatnonzero(np.isfinite(moved.linear.estimate).all(axis=1))
    contribution = contribution[kept]
    u2 = np.sum(contribution**2, axis=2, keepdims=True)
    share = np.divide(contribution**2, u2, out=np.zeros_like(contribution), where=u2 > 0.0)
    dof = np.stack([one.nu for one in loaded] + [f.dof for f in families[len(loaded) :]], axis=-1)[kept]
    each = len(STATED) * sources
    empty = np.full(kept.size * each, np.nan)
    names = [f.source for f in families]
    groups = [one.group for one in loaded] + names[len(loaded) :]
    units = [one.unit for one in loaded] + ["1"] * (sources - len(loaded))
    return pd.DataFrame(
        {
            "point": np.repeat(np.array(points.names, dtype=object)[kept], each),
            "run": np.repeat(np.array(points.runs, dtype=object)[kept], each),
            "coefficient": np.tile(np.repeat(np.array(STATED, dtype=object), sources), kept.size),
            "source": np.tile(np.array(names, dtype=object), kept.size * len(STATED)),
            "group": np.tile(np.array(groups, dtype=object), kept.size * len(STATED)),
            "standard_uncertainty": empty,
            "unit": np.tile(np.array(units, dtype=object), kept.size * len(STATED)),
            "sensitivity": empty,
            "contribution": contribution.ravel(),
            "share": share.ravel(),
            "dof": np.repeat(np.where(np.isinf(dof), np.nan, dof)[:, None, :], len(STATED), axis=1).ravel(),
        }
    )


def unmoved(moved: Stated, reduced: Reduced) -> list[str]:
    """Points with a nominal condition that could not be moved there."""
    asked = moved.problem.moves_alpha | moved.problem.moves_mach
    known = np.isfinite(reduced.linear.estimate[:, 0])
    lost = asked & known & ~np.isfinite(moved.problem.estimate[:, 0])
    keys = reduced.assembled.points.keys
    return [
        f"{keys[p]}: not moved to its nominal condition: its polar has one angle alone, so no local slope"
        for p in np.flatnonzero(lost)
    ]
