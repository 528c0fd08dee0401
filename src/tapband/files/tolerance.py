"""The tolerance within which two angles count as one, as a user writes it."""

from __future__ import annotations

from math import isfinite, radians

from tapband.files.faults import RuleError, shown
from tapband.files.units import ANGLE, quantity
from tapband.nouns.errors import QuestionError

WHERE = "within"


def tolerance(within: str | float | None, default: float) -> float:
    """The tolerance [rad]: "0.1 deg", a number of degrees, or (None) the default [rad]."""
    if within is None:
        return default
    try:
        value = quantity(within, ANGLE) if isinstance(within, str) else radians(within)
    except RuleError as error:
        raise QuestionError(f"{WHERE}: {error.rule}; got {error.got}; {error.do}") from error
    if not isfinite(value) or value < 0.0:
        raise QuestionError(
            f'{WHERE}: the tolerance of angles must be zero or more; got {shown(within)}; write "0.1 deg"'
        )
    return value
