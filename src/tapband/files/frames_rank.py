"""What drives each coefficient, as tables: by group, by tap, by wiring."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from tapband.nouns.problem import Problem
from tapband.probability.by_salib import sobol_by_salib
from tapband.probability.sensitivity import Indices, sobol
from tapband.questions.rank import Ranking, rank_groups
from tapband.questions.rank_screening import MANY, Screened, screen_sources
from tapband.questions.rank_taps import NOT_AT_A_TAP, TapRanking, rank_taps
from tapband.questions.rank_wiring import ARRANGEMENTS, Wirings, compare_wirings
from tapband.reduction import Reduced

Array = NDArray[np.float64]

INDEXED = 4_000
"""Most points that get Sobol' indices by default: a few seconds."""
ROWS = 400_000
"""Most rows of tap_ranking that are made by default."""
OPPOSED = "with others of opposite effect"
ASK = "tapband rank gives them point by point"


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

    ``location_leverage`` is the change of the coefficient per chord of the tap's place along the contour;
    ``note`` says why a share is negative.
    """
    sources = [*(f'negative: shares "{one.family.source}" {OPPOSED}' for one in reduced.assembled.loaded), ""]
    note = np.pad(
        np.array(sources, dtype=object)[found.against], ((0, 0), (0, 0), (0, 1)), constant_values=""
    )
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
        "note": note.ravel(),
    }
    frame = pd.DataFrame(columns)
    frame.attrs["units"] = {"location_leverage": "1/chord"}
    return frame


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


def wiring_comparison(reduced: Reduced, found: Wirings) -> pd.DataFrame:
    """One row a point, coefficient and source of tap pressure, then one for all of them together.

    ``declared`` is how the campaign shares the source, ``U`` the interval as declared; then for each
    arrangement the source's contribution and the whole U it leads to.
    """
    size, outputs, rows = found.contribution.shape[:3]
    columns: dict[str, object] = {
        **_labels(reduced, outputs * rows),
        "coefficient": _outputs(reduced, rows),
        "source": np.tile(np.array(found.sources, dtype=object), size * outputs),
        "declared": np.tile(np.array(found.declared, dtype=object), size * outputs),
        "U": np.repeat(reduced.linear.U.ravel(), rows),
    }
    for word, values in (("contribution", found.contribution), ("U", found.expanded)):
        for a, name in enumerate(ARRANGEMENTS):
            columns[f"{word}_{name.replace(' ', '_')}"] = values[..., a].ravel()
    frame = pd.DataFrame(columns)
    frame.attrs["notes"] = list(found.left_out)
    return frame


def screening(reduced: Reduced, found: Screened) -> pd.DataFrame:
    """One row a coefficient and source of one point, the most important first.

    ``loss`` is the part of U that is lost when the source and all behind it are left out.
    """
    order, outputs = np.argsort(found.place, kind="stable"), reduced.outputs
    groups = [one.group for one in reduced.assembled.loaded]
    names = np.array(found.sources, dtype=object)[order]
    return pd.DataFrame(
        {
            **_labels(reduced, len(outputs) * order.size),
            "coefficient": _outputs(reduced, order.size),
            "source": np.tile(names, len(outputs)),
            "group": np.tile(np.array(groups, dtype=object)[order], len(outputs)),
            "mu_star": found.mu_star[:, order].ravel(),
            "mu_star_ci": found.mu_star_ci[:, order].ravel(),
            "loss": found.loss[:, order].ravel(),
            "rank": np.tile(found.place[order], len(outputs)),
            "leave_out": np.tile(np.where(found.leave_out[order], "yes", "no").astype(object), len(outputs)),
        }
    )


def rank_tables(reduced: Reduced) -> tuple[dict[str, pd.DataFrame], tuple[str, ...]]:
    """ranking, tap_ranking and wiring_comparison by file name without its ending, and what was left out.

    A campaign of very many points leaves out what would take longer than its reduction.
    """
    assembled, intervals = reduced.assembled, reduced.campaign.intervals
    points, outputs = reduced.linear.estimate.shape
    groups = [one.group for one in assembled.loaded]
    few = points <= INDEXED
    indices = sobol(assembled.problem, groups, intervals.seed) if few else None
    found = rank_groups(assembled.problem, reduced.linear, groups, intervals.level, indices)
    tables = {"ranking": ranking(reduced, found)}
    said = () if few else (f"ranking.csv: {points} points are too many for Sobol' indices; {ASK}",)
    rows = points * outputs * (assembled.cp.shape[1] + 1)
    if rows > ROWS:
        return tables, (*said, f"tap_ranking.csv, wiring_comparison.csv: left out ({rows} rows); {ASK}")
    return tables | {
        "tap_ranking": tap_rows(reduced),
        "wiring_comparison": wiring_rows(reduced),
    }, said


def tap_rows(reduced: Reduced) -> pd.DataFrame:
    """tap_ranking of every point."""
    return tap_ranking(reduced, rank_taps(reduced.assembled))


def wiring_rows(reduced: Reduced) -> pd.DataFrame:
    """wiring_comparison of every point."""
    level = reduced.campaign.intervals.level
    return wiring_comparison(reduced, compare_wirings(reduced.assembled, reduced.linear, level))


def point_tables(reduced: Reduced, method: str | None) -> dict[str, pd.DataFrame]:
    """The same of a campaign of one point, and ranking by source and screening beside them.

    ``method`` None (as many samples as are needed), "N" base samples, or "salib:N".
    """
    assembled, linear, intervals = reduced.assembled, reduced.linear, reduced.campaign.intervals
    tables = {}
    for name, of in (
        ("ranking", [one.group for one in assembled.loaded]),
        ("source_ranking", [one.family.source for one in assembled.loaded]),
    ):
        indices = _indices(assembled.problem, of, intervals.seed, method)
        found = rank_groups(assembled.problem, linear, of, intervals.level, indices)
        tables[name] = ranking(reduced, found)
    tables |= {"tap_ranking": tap_rows(reduced), "wiring_comparison": wiring_rows(reduced)}
    if len(reduced.campaign.sources) > MANY:
        found_few = screen_sources(assembled.problem, linear, intervals.level, intervals.seed)
        tables["screening"] = screening(reduced, found_few)
    return tables


def _indices(problem: Problem, groups: Sequence[str], seed: int, method: str | None) -> Indices:
    if method is not None and method.startswith("salib:"):
        return sobol_by_salib(problem, 0, groups, int(method.removeprefix("salib:")), seed)
    return sobol(problem, groups, seed, samples=None if method is None else int(method))
