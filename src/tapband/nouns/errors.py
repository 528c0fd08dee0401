"""Every way tapband says no.

::

    TapbandError
    ├── InputError       faults of a campaign or its tables, all of one pass together (exit 2)
    ├── QuestionError    a question that this campaign cannot answer (exit 2)
    └── RangeError       a state outside a method's range (refused for that point, never repaired)

A message reads *where: rule; got value; what to do*.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


class TapbandError(Exception):
    """Base class of every error that tapband raises on purpose."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Fault:
    """One fault of an input: where it is, which rule it breaks, what stood there, what to do."""

    where: str
    rule: str
    got: str = ""
    do: str = ""

    def __str__(self) -> str:
        """The fault as one line."""
        got = f"; got {self.got}" if self.got else ""
        do = f"; {self.do}" if self.do else ""
        return f"{self.where}: {self.rule}{got}{do}"


class InputError(TapbandError):
    """All faults found in one pass over an input."""

    def __init__(self, faults: Iterable[Fault]) -> None:
        self.faults = tuple(faults)
        super().__init__("\n".join(str(fault) for fault in self.faults))


class QuestionError(TapbandError):
    """A question that the campaign at hand cannot answer; the message says why and what to do."""


class RangeError(TapbandError):
    """A state at which a method does not hold."""
