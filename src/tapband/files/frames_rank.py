"""What drives each coefficient, as tables: by group, by tap, by wiring."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from tapband.probability.sensitivity import sobol
from tapband.questions.rank import Ranking, rank_groups
from tapband.questions.rank_taps import NOT_AT_A_TAP, TapRanking, rank_taps
from tapband.reduction import Reduced

Array = NDArray[np.float64]


def ranking(reduced: Reduced, found: Ranking) -> pd.DataFrame:
    """One row a point, coefficient and group.

    ``U`` is the linearised expanded uncertainty, ``U_halved`` and ``U_removed`` what it becomes with the
    group's sources at half their size and without them; ``differs`` marks indices that are off the linear
    share by more than their interval, ``note`` says why.
    """
    size, outputs, groups = found.share.shape
    indices = found.indices
    none = np.full(found.share.shape, np.nan)
    columns: dict[str, object] = {
        **_labels(reduced, outputs * groups),
        "coefficient": _outputs(reduced, groups),
        "group": np.tile(np.array(found.groups, dtype=object), size * outputs),
        "linear_share": found.share.ravel(),
        "first_order": (none if indices is None else indices.first).ravel(),
        "first_order_ci": (none if indices is None else indices.first_ci).ravel(),
        "total": (none if indices is None else indices.total).ravel(),
        "total_ci": (none if indices is None else indices.total_ci).ravel(),
        "rank": found.rank.ravel(),
        "U": np.repeat(reduced.linear.U.ravel(), groups),
        "U_halved": found.halved.ravel(),
        "U_removed": found.removed.ravel(),
        "differs": np.where(found.differs.ravel(), "yes", "no").astype(object),
        "note": found.note.ravel(),
    }
    return pd.DataFrame(columns)


def tap_ranking(reduced: Reduced, found: TapRanking) -> pd.DataFrame:
    """One row a point, coefficient and tap, then one for what does not enter at a tap.

    ``location_leverage`` is the change of the coefficient per chord of the tap's place along the contour.
    """
    taps, (size, outputs, count) = reduced.campaign.taps, found.share.shape
    names = np.array((*taps.names, NOT_AT_A_TAP), dtype=object)
    place = {"x": np.append(taps.x, np.nan), "y": np.append(taps.y, np.nan)}
    columns: dict[str, object] = {
        **_labels(reduced, outputs * count),
        "coefficient": _outputs(reduced, count),
        "tap": np.tile(names, size * outputs),
        **{name: np.tile(values, size * outputs) for name, values in place.items()},
        "weight": _with_rest(found.weight),
        "share": found.share.ravel(),
        "if_lost": _with_rest(found.if_lost),
        "rank": found.rank.ravel(),
        "location_leverage": _with_rest(found.leverage),
    }
    return pd.DataFrame(columns)


def _with_rest(values: Array) -> Array:
    """(P m (n + 1),) with nothing in the row that is not a tap."""
    return np.pad(values, ((0, 0), (0, 0), (0, 1)), constant_values=np.nan).ravel()


def _labels(reduced: Reduced, each: int) -> dict[str, object]:
    points = reduced.assembled.points
    return {
        "point": np.repeat(np.array(points.names, dtype=object), each),
        "run": np.repeat(np.array(points.runs, dtype=object), each),
    }


def _outputs(reduced: Reduced, each: int) -> NDArray[np.object_]:
    names = np.repeat(np.array(reduced.outputs, dtype=object), each)
    return np.tile(names, len(reduced.assembled.points.names))


def rank_tables(reduced: Reduced, threads: int | None = None) -> dict[str, pd.DataFrame]:
    """ranking and tap_ranking by file name without its ending."""
    assembled, intervals = reduced.assembled, reduced.campaign.intervals
    groups = [one.group for one in assembled.loaded]
    indices = sobol(assembled.problem, groups, intervals.seed, threads=threads)
    found = rank_groups(assembled.problem, reduced.linear, groups, intervals.level, indices)
    return {"ranking": ranking(reduced, found), "tap_ranking": tap_ranking(reduced, rank_taps(assembled))}
