"""The options there are, as numbers: what each costs and adds to the variance at every demand.

D demands, J options of all slots together.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.campaign import Campaign
from tapband.nouns.plan import Option, Slot
from tapband.nouns.source import Source
from tapband.questions.basis import Basis, expanded_of
from tapband.questions.ranges import Ranges, Saturation, saturations

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Catalogue:
    """Options j: their slot, cost and terms; the terms that no choice changes; the limits."""

    slot: Indices
    """(J,) from 0, in ascending order."""
    cost: Array
    variance: Array
    """(J, D) with :attr:`quartic` (J, D) = Σ v²/ν over the option's sources."""
    quartic: Array
    fixed: Array
    """(D,) variance of all other sources, with :attr:`fixed_quartic` (D,)."""
    fixed_quartic: Array
    limit: Array
    """(D,)"""
    eligible: NDArray[np.bool_]
    level: float

    @property
    def slots(self) -> int:
        """Number of slots."""
        return int(self.slot[-1]) + 1 if self.slot.size else 0

    def ratio(self, chosen: Sequence[int] | Indices) -> Array:
        """(D,) expanded uncertainty over its limit with the options ``chosen``, one a slot."""
        index = np.asarray(chosen, dtype=np.int64)
        variance = self.fixed + self.variance[index].sum(axis=0)
        quartic = self.fixed_quartic + self.quartic[index].sum(axis=0)
        return np.asarray(expanded_of(variance, quartic, self.level) / self.limit)

    def worst(self, chosen: Sequence[int] | Indices) -> float:
        """The largest ratio."""
        return float(np.max(self.ratio(chosen), initial=0.0))

    def price(self, chosen: Sequence[int] | Indices) -> float:
        """Cost of the options together."""
        return float(np.sum(self.cost[np.asarray(chosen, dtype=np.int64)]))

    def scaled(self, factor: Array | float) -> Catalogue:
        """The same against limits multiplied by ``factor``."""
        return replace(self, limit=self.limit * factor)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Choices:
    """The catalogue of a campaign's slots with the nouns it stands for."""

    basis: Basis
    slots: tuple[Slot, ...]
    options: tuple[Option, ...]
    """(J,) in the order of the catalogue."""
    saturated: tuple[tuple[Saturation, ...], ...]
    """(J,) what each option's full scale does not hold; empty: eligible."""
    catalogue: Catalogue

    def campaign(self, chosen: Sequence[int] | Indices) -> Campaign:
        """The campaign planned for with the chosen options' sources in place."""
        options = [self.options[int(j)] for j in chosen]
        return with_options(self.basis.campaign, options)


def choices_of(basis: Basis, seen: Ranges) -> Choices:
    """The catalogue of the campaign's slots; ``seen`` are the ranges that full scales must hold."""
    slots = basis.campaign.plan.slots
    options = tuple(option for slot in slots for option in slot.options)
    saturated = tuple(saturations(basis, option, seen) for option in options)
    replaced = {name for slot in slots for name in slot.replaces}
    kept = np.array([name not in replaced for name in basis.names], dtype=np.bool_)
    demands = len(basis.demands.limit)
    variance, quartic = np.zeros((len(options), demands)), np.zeros((len(options), demands))
    for j, option in enumerate(options):
        for source in option.sources:
            terms = basis.terms(scaled_source(source, option))
            variance[j] += terms.variance
            quartic[j] += terms.quartic
    catalogue = Catalogue(
        slot=np.repeat(np.arange(len(slots)), [len(slot.options) for slot in slots]).astype(np.int64),
        cost=np.array([option.cost for option in options], dtype=np.float64),
        variance=variance,
        quartic=quartic,
        fixed=basis.variance[:, kept].sum(axis=1),
        fixed_quartic=basis.quartic[:, kept].sum(axis=1),
        limit=basis.demands.limit,
        eligible=np.array([not one for one in saturated], dtype=np.bool_),
        level=basis.level,
    )
    return Choices(basis=basis, slots=slots, options=options, saturated=saturated, catalogue=catalogue)


def scaled_source(source: Source, option: Option) -> Source:
    """The source with the full scale of its option, where that states one."""
    return source if option.full_scale is None else replace(source, full_scale=option.full_scale)


def with_options(campaign: Campaign, options: Sequence[Option]) -> Campaign:
    """The campaign with the sources of ``options`` in the place of those of the same name."""
    new = {s.name: scaled_source(s, option) for option in options for s in option.sources}
    return replace(campaign, sources=tuple(new.get(source.name, source) for source in campaign.sources))
