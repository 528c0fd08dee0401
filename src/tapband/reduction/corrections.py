"""Corrections that one-sided or unequal limits imply, applied before anything is computed, and reported."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.campaign import Campaign, Points
from tapband.nouns.source import Source
from tapband.nouns.symbols import MEASURED
from tapband.reduction.loads import PER_UNIT, middle, ports_of, unit_of
from tapband.reduction.nominal import Nominal

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Correction:
    """What was added to a quantity: the smallest and the largest amount over points and taps."""

    source: str
    act: str
    lowest: float
    highest: float
    unit: str

    def __str__(self) -> str:
        """One line for people."""
        amount = f"{self.lowest:+.6g}"
        if self.highest != self.lowest:
            amount += f" to {self.highest:+.6g}"
        return f'"{self.source}": {amount} {self.unit} added to the {self.act} (the middle of its limits)'


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Corrected:
    """Points with their corrections, and the amounts that enter the chain elsewhere."""

    points: Points
    extra: Array
    """(P, n) added to Cp."""
    location: Array
    """(n,) added to the taps' arc length [chords]."""
    shifts: dict[str, Array]
    """mach_shift, q_shift (P,) where a derived value is corrected."""
    chord: float
    """[m] added to the chord."""
    centre: float
    edge: float
    added: Array
    """(P, m)."""
    made: tuple[Correction, ...]


def correct(campaign: Campaign, points: Points, nominal: Nominal, outputs: int) -> Corrected:
    """The points with every implied correction applied."""
    size = len(points.names)
    readings, channels, alpha = points.readings.copy(), dict(points.channels), points.alpha.copy()
    extra, location = np.zeros_like(readings), np.zeros(readings.shape[1])
    shifts: dict[str, Array] = {}
    single = {"length": 0.0, "centre": 0.0, "edge_common": 0.0}
    added, made = np.zeros((size, outputs)), []
    for source in campaign.sources:
        if all(term.middle == 0.0 for term in source.size.terms):
            continue
        for act, slot, amount in _amounts(source, campaign, nominal):
            made.append(_said(source.name, act, amount))
            if slot == "reading":
                readings += amount
            elif slot == "extra":
                extra += amount
            elif slot == "shift":
                location += amount[0] * (nominal.tangent_x if act == "tap row" else 1.0)
            elif slot == "alpha":
                alpha += amount
            elif slot in channels:
                channels[slot] = channels[slot] + amount
            elif slot in ("mach_shift", "q_shift"):
                shifts[slot] = shifts.get(slot, np.zeros(size)) + amount
            elif slot in single:
                single[slot] += float(amount[0])
            else:
                added += nominal.added_rows(slot, amount)[:, :, 0]
    return Corrected(
        points=replace(points, readings=readings, channels=channels, alpha=alpha),
        extra=extra,
        location=location,
        shifts=shifts,
        chord=single["length"],
        centre=single["centre"],
        edge=single["edge_common"],
        added=added,
        made=tuple(made),
    )


def _amounts(source: Source, campaign: Campaign, nominal: Nominal) -> list[tuple[str, str, Array]]:
    result = []
    for act in source.acts_on:
        slot, reading = nominal.slot(act)
        if slot in ("reading", "extra", "shift"):
            scale = campaign.taps.full_scale if source.full_scale is None else source.full_scale
            amount = middle(source.size, nominal.tap_reading(act), np.asarray(scale))
            result.append((act, slot, np.where(nominal.live, np.nan_to_num(amount), 0.0)))
            continue
        own = campaign.channels.get(slot)
        full = source.full_scale if source.full_scale is not None else own.full_scale if own else np.nan
        result.append(
            (act, slot if act not in MEASURED else act, middle(source.size, reading, np.asarray(full)))
        )
    for name, _, full_scale in ports_of(source, campaign):
        if name in nominal.channels:
            reading = nominal.channels[name]
            result.append((f"reading of {name}", name, middle(source.size, reading, np.asarray(full_scale))))
    return result


def _said(source: str, act: str, amount: Array) -> Correction:
    scaled = amount * PER_UNIT.get(act, 1.0)
    return Correction(
        source=source,
        act=act,
        lowest=float(scaled.min()),
        highest=float(scaled.max()),
        unit="Pa" if act.startswith("reading of") else unit_of(act),
    )
