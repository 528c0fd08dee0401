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

JUDGED = (
    "A layout is judged by its true error on inviscid flows of this section and of thinner, thicker and more or "
    "less cambered ones; what the stream, the angle and other sources outside the taps add is left out of it."
)


def remarks(sized: Sized) -> tuple[str, ...]:
    """Lines for the reader, the most important first."""
    said = [
        _headline(sized), *_selection(sized), *_ranges(sized), *_wiring(sized), *_layout(sized),
        *_averaging(sized), *sized.notes, ALLOWANCE,
    ]  # fmt: skip
    if not sized.allocation.possible:
        said.append(
            "No sizes of all declared sources together meet the targets: what stays fails them alone."
        )
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
    where = f"{place(sized, worst)} with U {ratio[worst]:.4g} times its target"
    if not missed:
        return f"As declared, every target is met; the nearest is {where}."
    return f"As declared, targets are missed by {missed} of {ratio.size} intervals; the widest is {where}."


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
        return [first, f"What binds is {where}: U is {ratio:.4g} times its target.", *said]
    assert chosen.smallest is not None
    names = "; ".join(choices.options[j].name for j in chosen.smallest.chosen)
    expanded = ratio * sized.basis.demands.limit[chosen.binding]
    return [
        "Infeasible: no set of options meets every target.",
        f"The smallest worst ratio that can be reached is {ratio:.4g}, at a cost of {chosen.smallest.cost:g}, with "
        f"{names}; what binds is {where} with U = {expanded:.3g}.",
        *said,
    ]


def _ranges(sized: Sized) -> list[str]:
    seen = sized.ranges
    past = np.flatnonzero(np.nan_to_num(seen.utilisation) > 1.0)
    if not past.size:
        return []
    names = ", ".join(seen.names[i] for i in past[:8]) + (" …" if past.size > 8 else "")
    return [f"{past.size} channels may read past their full scale, margin and fluctuation counted: {names}."]


def _wiring(sized: Sized) -> list[str]:
    if sized.wiring is None:
        return []
    if not sized.wiring.shared:
        return ["Wiring: no source is shared by module, so every wiring gives the same intervals."]
    judged = {one.name: one.worst for one in sized.wiring.wirings}
    others = ", ".join(f"{name} {worst:.4g}" for name, worst in judged.items() if name != "found")
    return [
        f"Wiring: the worst ratio of U to target is {judged['found']:.4g} with the wiring found; {others}."
    ]


def _layout(sized: Sized) -> list[str]:
    choice = sized.layout
    if choice is None:
        return []
    found, root, cosine = choice.of("found"), choice.of("root"), choice.of("cosine")
    said = (
        f"Taps: {found.taps} at the places found make a worst true rms error of {found.error:.3g} times its target "
        f"(√x {root.error:.3g}, cosine {cosine.error:.3g}) and a worst U of {found.interval:.3g} times it "
        f"(√x {root.interval:.3g}, cosine {cosine.interval:.3g})."
    )
    fewest = [one.taps for one in choice.judged if one.layout == "found" and one.interval <= 1.0]
    more = f" The fewest looked at that meet every target are {min(fewest)}." if fewest else ""
    return [said + more, JUDGED]


def _averaging(sized: Sized) -> list[str]:
    found = sized.averaging
    if found is None:
        return []
    longest = float(np.max(np.nan_to_num(found.record, nan=np.inf)))
    if np.isinf(longest):
        return ["Averaging: some targets are missed however long a record is."]
    return [
        f"Averaging: a record of {longest:.3g} s keeps every target with the fluctuation of the forecast."
    ]
