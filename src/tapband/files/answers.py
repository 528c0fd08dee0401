"""Questions between points, put to a reduced or assembled campaign, and their answers as tables."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from tapband.files import frames_between as frames
from tapband.files.frames_stated import unmoved, with_stated_columns
from tapband.files.tolerance import angle, tolerance
from tapband.nouns.errors import QuestionError
from tapband.nouns.plan import Polar
from tapband.questions.between_trials import of_differences, of_fits
from tapband.questions.compare import compare
from tapband.questions.decide import Decision, decisions
from tapband.questions.fit import fits
from tapband.questions.joint import Evaluated, joint_trials
from tapband.questions.latents import Latents, latents_at
from tapband.questions.law import Drawn
from tapband.questions.one_polar import fit_of
from tapband.questions.regions import regions
from tapband.questions.repeats import Repeats, repeats, repeats_of
from tapband.questions.stated import Together, stated, stated_problem, with_stated
from tapband.reduction import Reduced
from tapband.reduction.assemble import Assembled

if TYPE_CHECKING:
    import pandas as pd

SAID = 3
"""Failing decisions that are named in the warnings."""
UNLIKELY = 0.001
"""Probability under which repeats that scatter too much are warned of; many are judged."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Setting:
    """What every question needs beside the latents: level, seed, and what counts as one angle [rad].

    ``problem`` None (results read back): no joint trials, so no Monte Carlo intervals.
    """

    level: float
    seed: int
    same_angle: float
    problem: Evaluated | None
    trials: str = "auto"

    @classmethod
    def of(cls, assembled: Assembled) -> Setting:
        """That of a campaign."""
        campaign = assembled.campaign
        stated_too = stated_problem(assembled, latents_at(assembled))
        return cls(
            level=campaign.intervals.level,
            seed=campaign.intervals.seed,
            same_angle=campaign.plan.polar.same_angle,
            problem=assembled.problem if stated_too is None else Together(stated=stated_too),
            trials=campaign.intervals.trials,
        )


def compared(latents: Latents, setting: Setting, a: str, b: str, within: str | float | None) -> pd.DataFrame:
    """The table of differences of two sides."""
    found = compare(latents, a, b, within=tolerance(within, setting.same_angle), level=setting.level)
    if setting.problem is None:
        return frames.differences(found, Drawn.none(found.value.shape))
    drawn = of_differences(setting.problem, latents, found, setting.level, setting.seed, setting.trials)
    return frames.differences(found, drawn)


def drawn_together(assembled: Assembled, latents: Latents, names: Sequence[str], trials: int) -> pd.DataFrame:
    """Joint trials of points, one row each, columns (point, coefficient)."""
    import pandas as pd

    if trials < 1:
        raise QuestionError(f"draws: the number of trials must be 1 or more; got {trials}; write trials=1000")
    points = np.array([latents.index(name) for name in names], dtype=np.int64)
    setting = Setting.of(assembled)
    assert setting.problem is not None
    joint = joint_trials(setting.problem, latents, points, setting.seed, 0, trials)
    y = joint.y[joint.places(points)]
    keys = [latents.keys[p] for p in points]
    columns = pd.MultiIndex.from_product([keys, latents.outputs], names=["point", "coefficient"])
    return pd.DataFrame(np.swapaxes(y, 0, 1).reshape(trials, -1), columns=columns)


def fit_by_name(
    latents: Latents,
    setting: Setting,
    asked: Polar,
    name: str,
    linear_range: tuple[str | float, str | float] | None,
    centre: float,
) -> pd.DataFrame:
    """The table of fits of one run or config, over a linear range of the user's own."""
    limits = None if linear_range is None else (angle(linear_range[0]), angle(linear_range[1]))
    found = fit_of(latents, name, asked, limits, centre, setting.level)
    if setting.problem is None:
        return frames.fits(found, Drawn.none(found.value.shape))
    return frames.fits(found, of_fits(setting.problem, latents, found, setting.level, setting.seed))


def repeats_by_name(latents: Latents, setting: Setting, names: Sequence[str]) -> pd.DataFrame:
    """The table of repeats of points that the user names."""
    return frames.repeats(repeats_of(latents, names, setting.same_angle, setting.level), latents)


@dataclass(frozen=True, slots=True, kw_only=True)
class Between:
    """What a campaign answers of itself: tables by file name, warnings, and whether a decision fails."""

    tables: dict[str, pd.DataFrame]
    warnings: tuple[str, ...]
    failed: bool
    latents: Latents
    """With the stated condition, where there is one."""


def between(reduced: Reduced, tables: Mapping[str, pd.DataFrame]) -> Between:
    """Fits, repeats, regions, decisions and the stated condition; ``tables`` are those of the main job.

    Empty tables are left out; ``coefficients`` and ``budget`` gain what is at the stated condition.
    """
    campaign, assembled = reduced.campaign, reduced.assembled
    latents = latents_at(assembled)
    level, seed = campaign.intervals.level, campaign.intervals.seed
    found: dict[str, pd.DataFrame] = {}
    centre = campaign.section.moment_centre + assembled.corrected.centre
    lines = fits(latents, campaign.plan.polar, centre, level)
    if lines is not None:
        found["fits"] = frames.fits(lines, of_fits(assembled.problem, latents, lines, level, seed))
    again = repeats(latents, campaign.plan.polar.same_angle, level)
    if again:
        found["repeats"] = frames.repeats(again, latents)
    joint = regions(reduced, latents)
    if joint:
        found["regions"] = frames.regions(joint, latents)
    decided, said = decisions(reduced, latents)
    if decided:
        found["decisions"] = frames.decisions(decided, latents)
    rows = assembled.samples
    if rows is not None and any(one is not None for one in rows.series):
        found["samples"] = frames.samples(rows.series, latents)
    moved = stated(reduced, latents)
    if moved is not None:
        found |= with_stated_columns(tables, moved, reduced)
        latents = with_stated(latents, moved.problem)
        said = [*said, *unmoved(moved, reduced)]
    failed = [one for one in decided if one.answer == "fails"]
    said = [*said, *_failures(failed, latents), *_surprises(again, latents)]
    return Between(tables=found, warnings=tuple(said), failed=bool(failed), latents=latents)


def _failures(failed: Sequence[Decision], latents: Latents) -> list[str]:
    """Decisions that fail, a line each up to a few."""
    lines = [
        f"decision: {one.coefficient} of {latents.keys[one.point]} fails; {one.value:.4g} ± {one.expanded:.2g} "
        f"is asked to be {_limits(one)}"
        for one in failed[:SAID]
    ]
    more = len(failed) - SAID
    return [*lines, f"decisions: {more} more fail; see the table of decisions"] if more > 0 else lines


def _limits(one: Decision) -> str:
    if np.isinf(one.lower):
        return f"at most {one.upper:g}"
    return f"at least {one.lower:g}" if np.isinf(one.upper) else f"{one.lower:g} to {one.upper:g}"


def _surprises(again: Sequence[Repeats], latents: Latents) -> list[str]:
    """Repeats that scatter more than what changes between them predicts, a line a coefficient."""
    lines = {}
    for one in again:
        if one.scatter > one.predicted and one.p < UNLIKELY:
            at = "over all angles" if np.isnan(one.alpha) else f"at {np.degrees(one.alpha):.2f} deg"
            config = f" of {one.config}" if one.config else ""
            lines[one.coefficient] = (
                f"repeats{config} {at}: {one.coefficient} scatters by {one.scatter:.2g}, where the sources that "
                f"change between them predict {one.predicted:.2g} (p = {one.p:.1g})"
            )
    return list(lines.values())
