"""Questions between points, put to a reduced or assembled campaign, and their answers as tables."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from tapband.files import frames_between as frames
from tapband.files.tolerance import tolerance
from tapband.questions.between_trials import of_differences, of_fits
from tapband.questions.compare import compare
from tapband.questions.decide import decisions
from tapband.questions.fit import fits
from tapband.questions.latents import Latents
from tapband.questions.law import Drawn
from tapband.questions.regions import regions
from tapband.questions.repeats import repeats
from tapband.reduction import Reduced
from tapband.reduction.assemble import Assembled

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True, slots=True, kw_only=True)
class Setting:
    """What every question needs beside the latents: level, seed, and what counts as one angle [rad].

    ``assembled`` None (results read back): no joint trials, so no Monte Carlo intervals.
    """

    level: float
    seed: int
    same_angle: float
    assembled: Assembled | None


def compared(latents: Latents, setting: Setting, a: str, b: str, within: str | float | None) -> pd.DataFrame:
    """The table of differences of two sides."""
    found = compare(latents, a, b, within=tolerance(within, setting.same_angle), level=setting.level)
    if setting.assembled is None:
        return frames.differences(found, Drawn.none(found.value.shape))
    drawn = of_differences(setting.assembled, latents, found, setting.level, setting.seed)
    return frames.differences(found, drawn)


@dataclass(frozen=True, slots=True, kw_only=True)
class Between:
    """What a campaign answers of itself: tables by file name, warnings, and whether a decision fails."""

    tables: dict[str, pd.DataFrame]
    warnings: tuple[str, ...]
    failed: bool


def between(reduced: Reduced, latents: Latents) -> Between:
    """Fits, and every other table that needs no further question. Empty ones are left out."""
    campaign, assembled = reduced.campaign, reduced.assembled
    level, seed = campaign.intervals.level, campaign.intervals.seed
    tables: dict[str, pd.DataFrame] = {}
    centre = campaign.section.moment_centre + assembled.corrected.centre
    found = fits(latents, campaign.plan.polar, centre, level)
    if found is not None:
        tables["fits"] = frames.fits(found, of_fits(assembled, latents, found, level, seed))
    again = repeats(latents, campaign.plan.polar.same_angle, level)
    if again:
        tables["repeats"] = frames.repeats(again, latents)
    joint = regions(reduced, latents)
    if joint:
        tables["regions"] = frames.regions(joint, latents)
    decided, said = decisions(reduced, latents)
    if decided:
        tables["decisions"] = frames.decisions(decided, latents)
    failed = any(one.answer == "fails" for one in decided)
    return Between(tables=tables, warnings=tuple(said), failed=failed)
