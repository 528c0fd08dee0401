"""From declared sources to latents: which quantity each latent moves, at which taps and points, how far."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.campaign import Campaign, Points
from tapband.nouns.problem import Family
from tapband.nouns.source import COMMON, INDEPENDENT, Scale, Shape, Size, Source
from tapband.nouns.symbols import MEASURED
from tapband.reduction.nominal import ON_TAPS, SLOT_OF, Nominal

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

PER_UNIT = {"angle": 180.0 / np.pi}
LINEAR_SLOTS = frozenset({"reading", "extra", "edge_common", "edge_loading", "added"})
"""Slots that enter the measured coefficients linearly, given all the others."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Entry:
    """One quantity a family moves. For tap slots ``member`` (n,) is each tap's latent and ``load`` (P, n);
    for the slot "added" ``load`` is (P, m, G); else ``member`` (1,) and ``load`` (P,)."""

    slot: str
    member: Indices
    load: Array

    @property
    def on_taps(self) -> bool:
        """Whether the quantity has one value a tap."""
        return self.slot in ON_TAPS


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Loaded:
    """A family with all its entries, the group it is ranked in, and its statement for the budget."""

    family: Family
    group: str
    entries: tuple[Entry, ...]
    standard: Array
    """(P,) standard uncertainty in the source's unit; NaN where it differs between taps."""
    unit: str

    @property
    def nu(self) -> Array:
        """(P,) degrees of freedom, a relative doubt counted in (JCGM 100, G.4.2)."""
        doubt = self.family.reliability
        return np.minimum(self.family.dof, 0.5 / doubt**2 if doubt > 0.0 else np.inf)

    def part(self, points: slice) -> Loaded:
        """The same at a block of points."""
        family = self.family
        return replace(
            self,
            standard=self.standard[points],
            family=replace(
                family,
                point_group=family.point_group[points],
                scale_group=family.scale_group[points],
                dof=family.dof[points],
            ),
            entries=tuple(replace(entry, load=entry.load[points]) for entry in self.entries),
        )


def point_groups(points: Points, across: str) -> tuple[str, ...]:
    """Key of the group in which each point shares its draws (P,)."""
    if across == INDEPENDENT:
        return points.keys
    if across == COMMON:
        return ("",) * len(points.names)
    return points.columns[across.removeprefix("by ")]


def load(source: Source, campaign: Campaign, points: Points, nominal: Nominal) -> Loaded:
    """The latents of a declared source.

    *Assumes* the campaign has been checked: acts, sharing and full scales all exist.
    """
    members, groups_of = _members(source, campaign)
    pairs = [_entry(act, source, campaign, nominal, groups_of) for act in source.acts_on]
    entries = [entry for entry, _ in pairs]
    entries += _ports(source, campaign, nominal)
    family = Family(
        source=source.name,
        members=members,
        point_group=point_groups(points, source.across_points),
        scale_group=("",) * len(points.names),
        shape=source.size.shape,
        top=source.size.top,
        dof=np.full(len(points.names), source.size.dof),
        reliability=_doubt(source.size),
        systematic=source.systematic,
        linear=all(e.slot in LINEAR_SLOTS for e in entries),
    )
    if source.size.shape is Shape.NORMAL and source.size.reliability > 0.0:
        family = replace(family, dof=np.full(len(points.names), source.size.nu))
    return Loaded(
        family=family,
        group=source.group,
        entries=tuple(entries),
        standard=_one_number(pairs[0][1]) * PER_UNIT.get(source.acts_on[0], 1.0),
        unit=unit_of(source.acts_on[0]),
    )


def _doubt(size: Size) -> float:
    return 0.0 if size.shape is Shape.NORMAL else size.reliability


def unit_of(act: str) -> str:
    """Unit a source's standard uncertainty is reported in."""
    if act in ("tap location", "tap row", "moment centre"):
        return "chord"
    if act == "angle":
        return "deg"
    if act == "chord":
        return "m"
    return "Pa" if "pressure" in act else "1"


def _members(source: Source, campaign: Campaign) -> tuple[tuple[str, ...], Indices]:
    """Names of the latents across taps, and the latent of each tap (n,)."""
    taps = campaign.taps
    size = len(taps.names)
    if source.across_taps == INDEPENDENT:
        ports = tuple(c for c in campaign.channels if "tap pressure" in source.acts_on)
        return taps.names + ports, np.arange(size)
    if source.across_taps in ("", COMMON):
        return ("",), np.zeros(size, dtype=np.int64)
    column = source.across_taps.removeprefix("by ")
    values = taps.columns[column]
    of_channels = [c.columns[column] for c in campaign.channels.values() if column in c.columns]
    names = tuple(sorted({v for v in (*values, *of_channels) if v}))
    return names, np.array([names.index(v) if v else -1 for v in values], dtype=np.int64)


def _entry(
    act: str, source: Source, campaign: Campaign, nominal: Nominal, groups_of: Indices
) -> tuple[Entry, Array]:
    """The entry of one act, and the standard uncertainty it states, (P, n) or (P,)."""
    slot, reading = nominal.slot(act)
    if SLOT_OF.get(act) in ON_TAPS:
        scale = campaign.taps.full_scale if source.full_scale is None else source.full_scale
        half = spread(source.size, nominal.tap_reading(act), np.asarray(scale))
        moved = half * nominal.tangent_x if act == "tap row" else half
        acted = nominal.live & (groups_of >= 0)
        moved = np.where(acted, np.nan_to_num(moved), 0.0)
        return Entry(slot=slot, member=np.maximum(groups_of, 0), load=moved), np.where(acted, half, np.nan)
    own = campaign.channels.get(slot)
    scale = source.full_scale if source.full_scale is not None else own.full_scale if own else np.nan
    half = spread(source.size, reading, np.asarray(scale))
    if act in MEASURED:
        return Entry(
            slot="added", member=np.zeros(1, dtype=np.int64), load=nominal.added_rows(act, half)
        ), half
    relative = half / campaign.section.chord if act == "chord" else half
    return Entry(slot=slot, member=np.zeros(1, dtype=np.int64), load=relative), half


def ports_of(source: Source, campaign: Campaign) -> list[tuple[str, int, float]]:
    """Stream channels on a module, which share a tap-pressure source: name, latent, full scale [Pa].

    A channel that the source names itself is not moved twice.
    """
    if "tap pressure" not in source.acts_on:
        return []
    members, _ = _members(source, campaign)
    stated = {SLOT_OF.get(act) for act in source.acts_on}
    column = source.across_taps.removeprefix("by ")
    ports = []
    for name, channel in campaign.channels.items():
        if source.across_taps == INDEPENDENT:
            index = members.index(name)
        elif source.across_taps == COMMON:
            index = 0
        elif column in channel.columns:
            index = members.index(channel.columns[column])
        else:
            continue
        if name not in stated:
            ports.append(
                (name, index, channel.full_scale if source.full_scale is None else source.full_scale)
            )
    return ports


def _ports(source: Source, campaign: Campaign, nominal: Nominal) -> list[Entry]:
    """A stream channel on a module is one more port of it."""
    return [
        Entry(
            slot=name,
            member=np.array([index]),
            load=spread(source.size, nominal.channels[name], np.asarray(full_scale)),
        )
        for name, index, full_scale in ports_of(source, campaign)
        if name in nominal.channels
    ]


def spread(size: Size, reading: Array, full_scale: Array) -> Array:
    """Standard uncertainty at each reading, in its shape; terms in % of reading keep the reading's sign.

    One term alone may be negative, so that a shared gain moves a suction and a pressure oppositely. Several
    terms add as absolute values.
    """
    parts = [_term(term.half, term.scale, reading, full_scale) for term in size.terms]
    total = parts[0] if len(parts) == 1 else np.sum([np.abs(p) for p in parts], axis=0)
    return np.asarray(total / size.divisor)


def middle(size: Size, reading: Array, full_scale: Array) -> Array:
    """Correction that unequal limits imply, in the shape of the reading (JCGM 100, 4.3.8)."""
    parts = [_term(term.middle, term.scale, reading, full_scale) for term in size.terms]
    return np.asarray(np.sum(parts, axis=0))


def _term(value: float, scale: Scale, reading: Array, full_scale: Array) -> Array:
    match scale:
        case Scale.READING:
            return value * reading
        case Scale.FULL_SCALE:
            return np.broadcast_to(value * full_scale, np.broadcast_shapes(reading.shape, full_scale.shape))
        case Scale.ABSOLUTE:
            return np.full(reading.shape, value)


def _one_number(size: Array) -> Array:
    """(P,) the standard uncertainty where one number describes it, NaN where it differs between taps."""
    size = np.abs(size)
    if size.ndim == 1:
        return size
    largest = np.nanmax(size, axis=1, initial=0.0)
    least = np.where(np.isnan(size), np.inf, size).min(axis=1)
    return np.where(largest <= least * (1.0 + 1e-12), largest, np.nan)
