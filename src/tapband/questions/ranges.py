"""The range that each tap and each stream channel will read over the points planned for.

A margin stretches the part of a reading that the flow makes, its distance from what the channel reads where
Cp is zero, so that it means the same for gauge and for absolute readings. A fluctuation adds three of its
standard deviations (common practice, no source).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.campaign import COEFFICIENT, STREAM_CHANNELS
from tapband.nouns.plan import Option
from tapband.nouns.source import Source
from tapband.questions.basis import Basis
from tapband.reduction.loads import ports_of
from tapband.reduction.nominal import SLOT_OF

Array = NDArray[np.float64]

PEAKS = 3.0
"""Standard deviations of a fluctuation that a range allows for (common practice, no source)."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Ranges:
    """What each of R channels (taps first, then the stream's) will read [Pa, or Cp], and its full scale."""

    names: tuple[str, ...]
    expected_lowest: Array
    expected_highest: Array
    lowest: Array
    """With margin and fluctuation, as :attr:`highest`; NaN at taps that are not used."""
    highest: Array
    full_scale: Array
    """NaN where none is stated."""

    @property
    def largest(self) -> Array:
        """Largest magnitude (R,)."""
        return np.maximum(np.abs(self.lowest), np.abs(self.highest))

    @property
    def utilisation(self) -> Array:
        """Largest magnitude over full scale (R,)."""
        return np.asarray(self.largest / self.full_scale)


@dataclass(frozen=True, slots=True, kw_only=True)
class Saturation:
    """A channel that will read past a full scale [Pa]."""

    channel: str
    reading: float
    full_scale: float

    def __str__(self) -> str:
        """One line for people."""
        return (
            f"{self.channel} may read {self.reading:.4g} Pa, past the full scale of {self.full_scale:.4g} Pa"
        )


def ranges(basis: Basis) -> Ranges:
    """The ranges of all taps and of the pressure channels of the stream."""
    campaign, points = basis.campaign, basis.raw
    forecast = campaign.plan.forecast
    margin = 0.0 if forecast is None else forecast.margin
    q = basis.assembled.stream.q[:, None]
    swing = 0.0 * q if forecast is None or forecast.fluctuation is None else PEAKS * forecast.fluctuation * q
    reading = np.where(basis.assembled.nominal.live, points.readings, np.nan)
    stretch = margin * q * np.abs(basis.assembled.nominal.cp)
    names = [name for name in STREAM_CHANNELS[campaign.stream] if name != "mach"]
    channels = np.stack([points.channels[name] for name in names], axis=1) if names else np.empty((len(q), 0))
    widen = (
        np.stack([_own(name, points.channels[name], q[:, 0]) for name in names], axis=1)
        if names
        else channels
    )
    value = np.concatenate([reading, channels], axis=1)
    widest = np.concatenate([stretch, margin * widen], axis=1) + swing
    # A suction is stretched to a deeper one and a pressure to a higher one; a stream reading both ways.
    sign = np.concatenate([np.sign(basis.assembled.nominal.cp), np.zeros_like(channels)], axis=1)
    down = np.where(sign > 0.0, swing, widest)
    up = np.where(sign < 0.0, swing, widest)
    scales = [campaign.channels[name].full_scale if name in campaign.channels else np.nan for name in names]
    taps = campaign.taps.full_scale
    return Ranges(
        names=(*campaign.taps.names, *names),
        expected_lowest=np.fmin.reduce(value, axis=0),
        expected_highest=np.fmax.reduce(value, axis=0),
        lowest=np.fmin.reduce(value - down, axis=0),
        highest=np.fmax.reduce(value + up, axis=0),
        full_scale=np.append(
            np.full_like(taps, np.nan) if campaign.pressures == COEFFICIENT else taps, scales
        ),
    )


def _own(name: str, value: Array, q: Array) -> Array:
    """(P,) the part of a stream reading [Pa] that goes with the dynamic pressure."""
    return value if name in ("p_difference", "q") else q


def saturations(basis: Basis, option: Option, seen: Ranges) -> tuple[Saturation, ...]:
    """Channels that an option's sources act on and that will read past its full scale; none: eligible."""
    found: dict[str, Saturation] = {}
    for source in option.sources:
        scale = source.full_scale if option.full_scale is None else option.full_scale
        if scale is None:
            continue
        for channel in _channels(source, basis):
            place = seen.names.index(channel)
            reading = float(seen.largest[place])
            if reading > scale:
                found[channel] = Saturation(channel=channel, reading=reading, full_scale=scale)
    return tuple(found.values())


def _channels(source: Source, basis: Basis) -> list[str]:
    """Names of the taps and stream channels that a source's instrument reads."""
    campaign = basis.campaign
    names: list[str] = []
    if "tap pressure" in source.acts_on and campaign.pressures != COEFFICIENT:
        names += campaign.taps.names
        names += [name for name, _, _ in ports_of(source, campaign)]
    names += [SLOT_OF[act] for act in source.acts_on if SLOT_OF.get(act) in STREAM_CHANNELS[campaign.stream]]
    if "dynamic pressure" in source.acts_on and "q" in STREAM_CHANNELS[campaign.stream]:
        names.append("q")
    known = (*campaign.taps.names, *STREAM_CHANNELS[campaign.stream])
    return [name for name in dict.fromkeys(names) if name in known and name != "mach"]
