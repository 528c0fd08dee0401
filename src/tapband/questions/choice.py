"""The cheapest options, confirmed: the exact linearised answer, held against Monte Carlo and mended by it.

Targets are held against the headline interval. Where Monte Carlo does not confirm the linearised one, a
choice that passes may fail, and is then left out; and one that fails may pass: the ratio of the two intervals
at the confirmed choice is then tried on the whole catalogue, and what that finds is confirmed in turn.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from tapband.questions.catalogue import Choices
from tapband.questions.confirm import Confirmed, confirm
from tapband.questions.selection import SAME, Chosen, Efficient, Search
from tapband.questions.targets import ROUNDING

Array = NDArray[np.float64]

ROUNDS = 12
"""Choices that Monte Carlo refuses before the search is given up, and said so."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Selection:
    """The answer: the choice (None: nothing meets the targets) and the intervals it was confirmed with.

    Where nothing does, ``smallest`` is the choice of the smallest worst ratio; None where a slot has no
    eligible option. ``ratio`` (D,) is the headline interval over its target with the one or the other.
    """

    choice: Efficient | None
    smallest: Efficient | None
    confirmed: Confirmed | None
    ratio: Array
    notes: tuple[str, ...]

    @property
    def binding(self) -> int | None:
        """The demand nearest to its target, or furthest past it."""
        return int(np.argmax(self.ratio)) if self.ratio.size else None


def selected(choices: Choices, trials: str | None = None) -> Selection:
    """The cheapest options that meet every target at every point, by the headline interval."""
    quest = _Quest(choices=choices, trials=trials)
    quest.linear()
    quest.refined()
    limit = choices.catalogue.limit
    if quest.found is not None:
        choice, seen = quest.found
        return Selection(
            choice=choice, smallest=None, confirmed=seen, ratio=seen.headline / limit, notes=quest.notes
        )
    smallest = Search(catalogue=choices.catalogue).smallest()
    if smallest is None:
        return Selection(choice=None, smallest=None, confirmed=None, ratio=np.empty(0), notes=quest.notes)
    seen = quest.confirmed(smallest)
    return Selection(
        choice=None, smallest=smallest, confirmed=seen, ratio=seen.headline / limit, notes=quest.notes
    )


@dataclass(slots=True, kw_only=True)
class _Quest:
    """The search under way: the best confirmed choice so far, and those that Monte Carlo refused."""

    choices: Choices
    trials: str | None
    found: tuple[Efficient, Confirmed] | None = None
    refused: list[Chosen] = field(default_factory=list)

    def confirmed(self, choice: Efficient) -> Confirmed:
        """Both intervals with a choice in place."""
        return confirm(self.choices.campaign(choice.chosen), self.choices.basis.demands, self.trials)

    def linear(self) -> None:
        """The cheapest choice by the linearised interval that Monte Carlo does not refuse."""
        search = Search(catalogue=self.choices.catalogue)
        while len(self.refused) < ROUNDS:
            candidate = search.cheapest()
            if candidate is None or self._tried(candidate)[0]:
                return
            search.forbid(candidate.chosen)

    def refined(self) -> None:
        """Cheaper choices, if the ratio of the two intervals that was seen last holds for others too."""
        catalogue = self.choices.catalogue
        seen = self.found[1] if self.found else None
        if seen is None:
            start = Search(catalogue=catalogue).smallest()
            seen = None if start is None else self.confirmed(start)
        while seen is not None and len(self.refused) < ROUNDS:
            factor = seen.factor
            if not np.all(np.isfinite(factor)) or np.all(np.abs(factor - 1.0) < SAME):
                return
            search = Search(catalogue=catalogue.scaled(1.0 / factor))
            for chosen in self.refused:
                search.forbid(chosen)
            candidate = search.cheapest()
            if candidate is None or (
                self.found is not None and candidate.cost >= self.found[0].cost * (1.0 - SAME)
            ):
                return
            seen = self._tried(candidate)[1]

    def _tried(self, candidate: Efficient) -> tuple[bool, Confirmed]:
        """Whether a choice meets every target by the headline interval; it is noted either way."""
        seen, limit = self.confirmed(candidate), self.choices.catalogue.limit
        meets = bool(np.all(seen.headline <= limit * (1.0 + ROUNDING) + seen.tolerance))
        if meets:
            worst = float(np.max(seen.headline / limit, initial=0.0))
            own = Efficient(chosen=candidate.chosen, cost=candidate.cost, worst=worst)
            self.found = (own, seen)
        else:
            self.refused.append(candidate.chosen)
        return meets, seen

    @property
    def notes(self) -> tuple[str, ...]:
        """What the reader should know of how the answer was found."""
        said = []
        if self.refused:
            count = len(self.refused)
            said.append(f"{count} choices that looked good enough linearised fail a target by Monte Carlo.")
        if len(self.refused) >= ROUNDS and self.found is None:
            said.append("The search was given up after these; another choice may meet the targets.")
        return tuple(said)
