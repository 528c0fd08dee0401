"""The interval to show first, and whether it meets what the campaign asks.

The linearised interval where Monte Carlo confirms it, else the Monte Carlo one (JCGM 101, clause 8).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import degrees
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.plan import Target

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]
SAME_ANGLE = 1e-7
"""[deg] Slack of an angle at the end of a range, for rounding."""
SLACK = 1.0
"""[deg] How far a listed point may lie past its range: the list has decided, within what counts as one angle."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Headline:
    """Headline intervals of one coefficient over the points (P,); NaN where a point has none."""

    estimate: Array
    low: Array
    high: Array
    from_trials: NDArray[np.bool_]
    """Where Monte Carlo did not confirm the linearised interval and its own stands."""

    @property
    def half(self) -> Array:
        """Half the width of the interval."""
        return 0.5 * (self.high - self.low)


@dataclass(frozen=True, slots=True, kw_only=True)
class Verdict:
    """How one target fares: the points it names (rows), half-widths there, and which meet it."""

    target: Target
    rows: NDArray[np.int64]
    half: Array
    met: NDArray[np.bool_]


def coefficients_of(frame: pd.DataFrame) -> tuple[str, ...]:
    """Names of the coefficients in the table, in its order."""
    names = [str(column).removesuffix("_U") for column in frame.columns if str(column).endswith("_U")]
    return tuple(name for name in names if name in frame.columns)


def headline(frame: pd.DataFrame, coefficient: str) -> Headline:
    """Headline intervals of a coefficient from the table of coefficients."""
    low, high = _numbers(frame, f"{coefficient}_low"), _numbers(frame, f"{coefficient}_high")
    if f"{coefficient}_agrees" not in frame.columns:
        no = np.zeros(len(frame), dtype=bool)
    else:
        no = np.asarray(frame[f"{coefficient}_agrees"].astype(object) == "no", dtype=bool)
        low = np.where(no, _numbers(frame, f"{coefficient}_mc_low"), low)
        high = np.where(no, _numbers(frame, f"{coefficient}_mc_high"), high)
    return Headline(estimate=_numbers(frame, coefficient), low=low, high=high, from_trials=no)


def verdicts(
    frame: pd.DataFrame, targets: Sequence[Target], named: pd.DataFrame | None = None
) -> tuple[Verdict, ...]:
    """Each target against the headline half-widths of the points it names.

    ``named`` is the table of targets, a row a target and point, where the results have one.
    """
    return tuple(
        _verdict(frame, target, named) for target in targets if f"{target.coefficient}_U" in frame.columns
    )


def _verdict(frame: pd.DataFrame, target: Target, named: pd.DataFrame | None) -> Verdict:
    rows = np.flatnonzero(_among(frame, target) if named is None else _listed(frame, target, named))
    half = headline(frame, target.coefficient).half[rows]
    # A width without a number meets nothing; one part in 1e9 is rounding.
    return Verdict(target=target, rows=rows, half=half, met=half <= target.expanded * (1 + 1e-9))


def _listed(frame: pd.DataFrame, target: Target, named: pd.DataFrame) -> NDArray[np.bool_]:
    rows = named.loc[np.asarray(named["coefficient"].astype(object) == target.coefficient)]
    wanted = set(np.array(keys(rows), dtype=object)[_numbers(rows, "target") == target.expanded])
    listed = np.array([key in wanted for key in keys(frame)], dtype=bool)
    # Two targets of one size on one coefficient differ by their points alone.
    return listed & _among(frame, target, SLACK) if target.points is None else listed


def _among(frame: pd.DataFrame, target: Target, slack: float = SAME_ANGLE) -> NDArray[np.bool_]:
    if target.points is not None:
        pairs = zip(keys(frame), frame["point"], strict=True)
        return np.array([key in target.points or name in target.points for key, name in pairs], dtype=bool)
    if target.alpha_range is not None:
        low, high = (degrees(end) for end in target.alpha_range)
        alpha = _numbers(frame, "alpha")
        return (alpha >= low - slack) & (alpha <= high + slack)
    return np.ones(len(frame), dtype=bool)


def keys(frame: pd.DataFrame) -> list[str]:
    """RUN/POINT where there is a run, else POINT, of every row."""
    runs = frame["run"].astype(object) if "run" in frame.columns else [""] * len(frame)
    return [
        f"{run}/{point}" if isinstance(run, str) and run else str(point)
        for run, point in zip(runs, frame["point"].astype(object), strict=True)
    ]


def _numbers(frame: pd.DataFrame, column: str) -> Array:
    return np.asarray(frame[column], dtype=float)
