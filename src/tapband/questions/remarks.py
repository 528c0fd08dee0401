"""What a plan says in words."""

from __future__ import annotations

import numpy as np

from tapband.questions.sizing import Sized

ALLOWANCE = (
    "An allowance is of one source alone, all others as declared; two sources cannot both take theirs."
)
FLUCTUATION = (
    "The fluctuation of the forecast widens ranges and sets averaging times; it enters intervals only as a "
    "source that the campaign declares, or as samples."
)


def remarks(sized: Sized) -> tuple[str, ...]:
    """Lines for the reader, the most important first."""
    said = [_headline(sized), *_selection(sized), *_ranges(sized), *sized.notes, ALLOWANCE]
    forecast = sized.basis.campaign.plan.forecast
    if forecast is not None and forecast.fluctuation:
        said.append(FLUCTUATION)
    if not sized.frontier_complete:
        said.append(f"The frontier is cut off after its {len(sized.frontier)} cheapest sets.")
    return tuple(said)


def place(sized: Sized, demand: int) -> str:
    """A demand in words: coefficient and point."""
    basis = sized.basis
    name = basis.assembled.problem.outputs[basis.demands.output[demand]]
    return f"{name} at {basis.raw.keys[basis.demands.point[demand]]}"


def _headline(sized: Sized) -> str:
    missed = int(np.sum(~sized.met))
    ratio = sized.declared.headline / sized.basis.demands.limit
    worst = int(np.argmax(np.where(np.isfinite(ratio), ratio, np.inf)))
    where = f"the nearest is {place(sized, worst)} with U {ratio[worst]:.3g} times its target"
    if not missed:
        return f"As declared, every target is met; {where}."
    return f"As declared, {missed} of {ratio.size} intervals are wider than their targets; {where}."


def _selection(sized: Sized) -> list[str]:
    chosen, choices = sized.selection, sized.choices
    if chosen is None or choices is None:
        return []
    said = list(chosen.notes)
    empty = [
        slot.name
        for i, slot in enumerate(choices.slots)
        if not np.any(choices.catalogue.eligible[choices.catalogue.slot == i])
    ]
    if empty:
        names = ", ".join(f'"{name}"' for name in empty)
        return [f"Infeasible: no option of slot {names} holds the readings within its full scale."]
    assert chosen.binding is not None
    where, ratio = place(sized, chosen.binding), chosen.ratio[chosen.binding]
    if chosen.choice is not None:
        names = "; ".join(choices.options[j].name for j in chosen.choice.chosen)
        first = f"The cheapest options that meet every target cost {chosen.choice.cost:g}: {names}."
        return [first, f"What binds is {where}: U is {ratio:.3g} times its target.", *said]
    assert chosen.smallest is not None
    names = "; ".join(choices.options[j].name for j in chosen.smallest.chosen)
    expanded = ratio * sized.basis.demands.limit[chosen.binding]
    return [
        "Infeasible: no set of options meets every target.",
        f"The smallest worst ratio that can be reached is {ratio:.3g}, at a cost of {chosen.smallest.cost:g}, with "
        f"{names}; what binds is {where} with U = {expanded:.3g}.",
        *said,
    ]


def _ranges(sized: Sized) -> list[str]:
    seen = sized.ranges
    past = np.flatnonzero(np.nan_to_num(seen.utilisation) > 1.0)
    if not past.size:
        return []
    names = ", ".join(seen.names[i] for i in past[:8]) + (" …" if past.size > 8 else "")
    return [
        f"{past.size} channels may read past their full scale, margin and fluctuation counted: {names}."
    ]
