"""The cheapest options, confirmed: the exact linearised answer, held against Monte Carlo and mended by it.

Targets are held against the headline interval. Where Monte Carlo does not confirm the linearised one, a
choice that passes may fail, and is then left out; and one that fails may pass: the ratio of the two intervals
at the confirmed choice is then tried on the whole catalogue, and what that finds is confirmed in turn.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from tapband.questions.catalogue import Choices
from tapband.questions.confirm import Confirmed, confirm
from tapband.questions.selection import SAME, Chosen, Efficient, Search
from tapband.questions.targets import ROUNDING

Array = NDArray[np.float64]

CONFIRMED = 60
"""Efficient choices that are confirmed by Monte Carlo."""
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


@dataclass(frozen=True, slots=True, kw_only=True)
class FrontierSet:
    """An efficient choice: its cost, and the worst ratio by the headline and by the linearised interval."""

    chosen: Chosen
    cost: float
    worst: float
    linear: float


def headline_frontier(
    choices: Choices,
    found: Sequence[Efficient],
    selection: Selection,
    trials: str | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> tuple[FrontierSet, ...]:
    """The efficient choices by the headline interval, cheapest first.

    ``found`` are those by the linearised interval; the selected one joins them. Of more than ``CONFIRMED``
    those nearest to their targets are confirmed; the others keep the linearised ratio.
    """
    catalogue = choices.catalogue
    sets = {one.chosen: one.cost for one in found}
    if selection.choice is not None:
        sets.setdefault(selection.choice.chosen, selection.choice.cost)
    linear = {chosen: catalogue.worst(chosen) for chosen in sets}
    near = sorted(sets, key=lambda chosen: abs(np.log(max(linear[chosen], 1e-9))))[:CONFIRMED]
    worst = dict(linear)
    for k, chosen in enumerate(near):
        seen = confirm(choices.campaign(chosen), choices.basis.demands, trials)
        if np.all(np.isfinite(seen.headline)):
            worst[chosen] = float(np.max(seen.headline / catalogue.limit, initial=0.0))
        if progress is not None:
            progress(k + 1, len(near))
    kept: list[FrontierSet] = []
    for chosen in sorted(sets, key=lambda one: (sets[one], worst[one])):
        if not kept or worst[chosen] < kept[-1].worst * (1.0 - SAME):
            kept.append(
                FrontierSet(chosen=chosen, cost=sets[chosen], worst=worst[chosen], linear=linear[chosen])
            )
    return tuple(kept)


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
