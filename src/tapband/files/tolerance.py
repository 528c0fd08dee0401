"""Angles, and the tolerance within which two count as one, as a user writes them."""

from __future__ import annotations

from math import isfinite, radians

from tapband.files.faults import RuleError, shown
from tapband.files.units import ANGLE, quantity
from tapband.nouns.errors import QuestionError

WHERE = "within"


def angle(value: str | float, where: str = "linear range") -> float:
    """An angle [rad]: "-4 deg", or a number of degrees."""
    try:
        return quantity(value, ANGLE) if isinstance(value, str) else radians(value)
    except RuleError as error:
        raise QuestionError(f"{where}: {error.rule}; got {error.got}; {error.do}") from error


def tolerance(within: str | float | None, default: float) -> float:
    """The tolerance [rad]: "0.1 deg", a number of degrees, or (None) the default [rad]."""
    if within is None:
        return default
    value = angle(within, WHERE)
    if not isfinite(value) or value < 0.0:
        raise QuestionError(
            f'{WHERE}: the tolerance of angles must be zero or more; got {shown(within)}; write "0.1 deg"'
        )
    return value
