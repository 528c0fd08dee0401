"""All that sizing answers, one after the other."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.campaign import Campaign
from tapband.questions.allocation import Allocation, allocation
from tapband.questions.allowances import Allowance, allowances
from tapband.questions.averaging import Averaging, averaging
from tapband.questions.basis import Basis, basis_of
from tapband.questions.catalogue import Choices, choices_of
from tapband.questions.choice import FrontierSet, Selection, headline_frontier, selected
from tapband.questions.confirm import Confirmed, confirm
from tapband.questions.layout import LayoutChoice, layout_choice, require_layout
from tapband.questions.ranges import Ranges, ranges
from tapband.questions.selection import Search, frontier
from tapband.questions.wiring_choice import WiringChoice, wiring_choice

Array = NDArray[np.float64]
Progress = Callable[[float, float, str], None]
"""Called as (done, total, doing)."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Sized:
    """The answers; None where the campaign does not ask."""

    basis: Basis
    declared: Confirmed
    """Intervals at each demand with the sources as declared."""
    ranges: Ranges
    allowances: tuple[Allowance, ...]
    allocation: Allocation
    choices: Choices | None
    selection: Selection | None
    frontier: tuple[FrontierSet, ...]
    frontier_complete: bool
    wiring: WiringChoice | None
    layout: LayoutChoice | None
    averaging: Averaging | None
    notes: tuple[str, ...]

    @property
    def met(self) -> NDArray[np.bool_]:
        """(D,) whether each demand is met with the sources as declared."""
        return self.basis.demands.met(self.declared.headline)

    @property
    def can_be_met(self) -> bool:
        """Whether the targets are met as declared, or by some choice of options."""
        chosen = self.selection is not None and self.selection.choice is not None
        return chosen or (self.selection is None and bool(np.all(self.met)))


def sized(campaign: Campaign, trials: str | None = None, progress: Progress | None = None) -> Sized:
    """Size what the campaign asks for. ``trials`` as in :func:`confirm`; default the campaign's."""
    basis = basis_of(campaign)
    seen, plan = ranges(basis), campaign.plan
    if plan.layout is not None:
        require_layout(basis)  # before the work, not after it
    wiring = None if plan.wiring is None else wiring_choice(basis, _step(progress, "wiring"))
    declared = confirm(basis.campaign, basis.demands, trials)
    choices = choices_of(basis, seen) if plan.slots else None
    selection = None if choices is None else selected(choices, trials)
    efficient: tuple[FrontierSet, ...] = ()
    complete = True
    if choices is not None and selection is not None:
        by_linear, complete = frontier(Search(catalogue=choices.catalogue), _step(progress, "frontier"))
        confirming = _step(progress, "confirming the frontier")
        efficient = headline_frontier(choices, by_linear, selection, trials, confirming)
    alone = allowances(basis, declared, trials, _step(progress, "allowances"))
    return Sized(
        basis=basis,
        declared=declared,
        ranges=seen,
        allowances=alone,
        allocation=allocation(basis, declared, alone, trials),
        choices=choices,
        selection=selection,
        frontier=efficient,
        frontier_complete=complete,
        wiring=wiring,
        layout=None if plan.layout is None else layout_choice(basis, _step(progress, "tap layout")),
        averaging=averaging(basis, declared.factor),
        notes=basis.notes,
    )


def _step(progress: Progress | None, doing: str) -> Callable[[int, int], None] | None:
    if progress is None:
        return None
    return lambda done, total: progress(done, total, doing)
