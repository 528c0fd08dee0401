"""What a source may act on: the dimension, whether taps are meant, and the reading it belongs to."""

from __future__ import annotations

from dataclasses import dataclass

from tapband.files.units import ANGLE, LENGTH, NUMBER, PRESSURE
from tapband.nouns.campaign import COEFFICIENT, STATIC, STREAM_CHANNELS, TOTAL, VACUUM
from tapband.nouns.symbols import MEASURED

CHORDS = "length in chords"
COEFFICIENTS = MEASURED
AUTOMATIC = (
    "finite tap spacing",
    "trailing edge",
    "rear loading",
    "scatter of samples",
    "compressibility rule",
)
"""Names that the program gives to sources of its own."""


@dataclass(frozen=True, slots=True)
class Act:
    """A quantity that errors act on; ``channel`` is the column that reads it."""

    dimension: str
    taps: bool = False
    channel: str = ""


ACTS: dict[str, Act] = {
    "tap pressure": Act(PRESSURE, taps=True),
    "tap location": Act(CHORDS, taps=True),
    "tap row": Act(CHORDS),
    "tap coefficient": Act(NUMBER, taps=True),
    "reference pressure": Act(PRESSURE),
    "total pressure": Act(PRESSURE, channel="p_total"),
    "static pressure": Act(PRESSURE, channel="p_static"),
    "pressure difference": Act(PRESSURE, channel="p_difference"),
    "dynamic pressure": Act(PRESSURE, channel="q"),
    "mach": Act(NUMBER, channel="mach"),
    "angle": Act(ANGLE, channel="alpha"),
    "chord": Act(LENGTH),
    "moment centre": Act(CHORDS),
    "trailing-edge coefficient": Act(NUMBER),
    **{name: Act(NUMBER) for name in COEFFICIENTS},
}


@dataclass(frozen=True, slots=True)
class Arrangement:
    """What the readings are relative to and where the stream comes from."""

    pressures: str
    stream: str

    @property
    def reference(self) -> str:
        """Absolute column that readings are relative to; empty where there is none."""
        return "" if self.pressures in {STATIC, TOTAL, VACUUM, COEFFICIENT} else self.pressures

    @property
    def stream_columns(self) -> tuple[str, ...]:
        """Stream columns that this arrangement reads."""
        columns = STREAM_CHANNELS.get(self.stream, ())
        absolute = self.pressures == VACUUM or self.reference
        return (*columns, "p_static") if self.stream == "dynamic and mach" and absolute else columns

    @property
    def columns(self) -> tuple[str, ...]:
        """Stream columns and the reference column."""
        return (*self.stream_columns, self.reference) if self.reference else self.stream_columns

    def channel(self, act: str) -> str:
        """Column whose number an act belongs to: a channel, "alpha", "taps", or empty for none."""
        if act == "reference pressure":
            return self.reference
        if act == "tap pressure" or (act == "tap coefficient" and self.pressures == COEFFICIENT):
            return "taps"
        channel = ACTS[act].channel
        return channel if channel == "alpha" or channel in self.columns else ""

    def lacks(self, act: str) -> str:
        """Why an act has nothing to act on here; empty where it has."""
        if act == "tap pressure" and self.pressures == COEFFICIENT:
            return "the readings are pressure coefficients"
        if act == "reference pressure" and not self.reference:
            return f'the readings are "{self.pressures}", not relative to a column of their own'
        if act in {"total pressure", "static pressure", "pressure difference"} and not self.channel(act):
            return f'a stream from "{self.stream}" has no reading {ACTS[act].channel}'
        if act == "dynamic pressure" and self.stream == "mach":
            return 'a stream from "mach" has no dynamic pressure'
        return ""
