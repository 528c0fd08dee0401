"""Answers between points as tables: differences, fits, repeats, regions, decisions. Angles in degrees."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from tapband.questions.compare import Differences

NAMED, SMALL = 3, 0.005
"""Sources named in a cell, and the share of variance below which none is."""


def differences(found: Differences) -> pd.DataFrame:
    """One row a pair and coefficient."""
    size, m = found.value.shape

    def each(values: object) -> NDArray[np.object_]:
        return np.repeat(np.array(values, dtype=object), m)

    def flat(values: NDArray[Any]) -> NDArray[Any]:
        return values.reshape(-1)

    equal_significant = np.abs(found.equal_angle_value) > found.equal_angle_expanded
    known = np.isfinite(found.value)
    frame = pd.DataFrame(
        {
            "a": each(found.a),
            "b": each(found.b),
            "coefficient": np.tile(np.array(found.outputs, dtype=object), size),
            "difference": flat(found.value),
            "u": flat(found.u),
            "U": flat(found.U),
            "k": flat(found.k),
            "low": flat(found.low),
            "high": flat(found.high),
            "u_if_independent": flat(found.u_independent),
            "significant": flat(_yes(found.significant, known)),
            "dof": flat(np.where(np.isinf(found.dof), np.nan, found.dof)),
            "alpha_a": np.repeat(np.degrees(found.alpha[:, 0]), m),
            "alpha_b": np.repeat(np.degrees(found.alpha[:, 1]), m),
            "mach_a": np.repeat(found.mach[:, 0], m),
            "mach_b": np.repeat(found.mach[:, 1], m),
            "interpolated": np.repeat(np.where(found.interpolated, "yes", "no").astype(object), m),
            "equal_angle": flat(found.equal_angle_value),
            "equal_angle_u": flat(found.equal_angle_u),
            "equal_angle_U": flat(found.equal_angle_expanded),
            "equal_angle_significant": flat(
                _yes(equal_significant, known & np.isfinite(found.equal_angle_expanded))
            ),
            "remaining": [_remaining(found, r, j) for r in range(size) for j in range(m)],
        }
    )
    frame.attrs["notes"] = list(found.notes)
    frame.attrs["units"] = {"alpha_a": "deg", "alpha_b": "deg"}
    return frame


def _yes(flag: NDArray[np.bool_], known: NDArray[np.bool_]) -> NDArray[np.object_]:
    return np.where(known, np.where(flag, "yes", "no").astype(object), "")


def _remaining(found: Differences, r: int, j: int) -> str:
    """The largest sources that do not cancel, with their shares of the variance."""
    total = found.u[r, j] ** 2
    if not total > 0.0:
        return ""
    share = found.variance[r, j] / total
    largest = [s for s in np.argsort(-share, kind="stable")[:NAMED] if share[s] >= SMALL]
    return ", ".join(f"{found.sources[s]} {100 * share[s]:.0f}%" for s in largest)
