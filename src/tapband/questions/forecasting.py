"""A campaign to come: the points that its forecast describes, in place of readings."""

from __future__ import annotations

from dataclasses import dataclass, replace

from tapband.experiment.expected import expected_cp, expected_readings
from tapband.nouns.campaign import Campaign
from tapband.nouns.errors import QuestionError

MARK = "Forecast, not measured: the readings are expected ones."
WORD = "forecast"


@dataclass(frozen=True, slots=True, kw_only=True)
class Outlook:
    """The campaign with its expected points, and what to know of them before anything else."""

    campaign: Campaign
    notes: tuple[str, ...]


def outlook(campaign: Campaign) -> Outlook:
    """The campaign of the forecast's points, marked in its title and its first warning."""
    points = expected_readings(campaign)
    notes = (MARK, *expected_cp(campaign).notes)
    title = f"Forecast: {campaign.title or campaign.name}"
    return Outlook(
        campaign=replace(campaign, points=points, title=title, warnings=(*notes, *campaign.warnings)),
        notes=notes,
    )


def planned_for(campaign: Campaign) -> Outlook:
    """What sizing starts from: the forecast where there is one, else the readings."""
    if campaign.plan.forecast is not None:
        return outlook(campaign)
    if campaign.points is None:
        raise QuestionError(
            "size: needs points to plan for; got neither [forecast] nor readings; add [forecast]"
        )
    return Outlook(
        campaign=campaign, notes=("Planned on the readings of the campaign: it has no [forecast].",)
    )
