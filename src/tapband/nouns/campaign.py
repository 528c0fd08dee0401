"""A campaign after reading: everything resolved, in SI units, angles in radians, lengths in chords.

Arrays are read-only. P is the number of points, n the number of taps in the table (excluded and lost ones
included; they are dead, not absent, so that no index ever shifts).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.plan import Plan
from tapband.nouns.source import Source

Array = NDArray[np.float64]

STATIC, TOTAL, VACUUM, COEFFICIENT = (
    "relative to static",
    "relative to total",
    "relative to vacuum",
    "pressure coefficient",
)
"""What tap readings are relative to; anything else is the name of an absolute reference column."""

STREAM_CHANNELS: Mapping[str, tuple[str, ...]] = {
    "total and static": ("p_total", "p_static"),
    "difference and static": ("p_difference", "p_static"),
    "dynamic and mach": ("q", "mach"),
    "mach": ("mach",),
}
"""Columns each stream arrangement needs (dynamic and mach also p_static, where readings need it)."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Section:
    """The section: contour points in table order [chords], chord [m], moment centre [x/c]."""

    x: Array
    y: Array
    chord: float
    contour_in_lengths: bool
    moment_centre: float
    full_arm: bool


@dataclass(frozen=True, slots=True, kw_only=True)
class Taps:
    """The tap table: arc length from the nose (upper positive) and position [chords], grouping columns."""

    names: tuple[str, ...]
    s: Array
    x: Array
    y: Array
    upper: NDArray[np.bool_]
    excluded: NDArray[np.bool_]
    full_scale: Array
    """[Pa], NaN where the table states none."""
    columns: Mapping[str, tuple[str, ...]]
    placed_in_lengths: bool


@dataclass(frozen=True, slots=True, kw_only=True)
class Channel:
    """A stream channel on a module: the group values its port has, and its full scale [Pa] (NaN: not stated)."""

    columns: Mapping[str, str]
    full_scale: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Rows:
    """A block of reading rows: point index (R,), angle [rad] (R,), channels [SI] (R,), tap readings (R, n)."""

    point: NDArray[np.int64]
    alpha: Array
    channels: Mapping[str, Array]
    readings: Array


@dataclass(frozen=True, slots=True, kw_only=True)
class Points:
    """Test points; where a point has several rows, their means.

    ``channels`` holds the stream columns and, where readings are relative to a column, that column.
    ``readings`` (P, n) is NaN at lost taps; [Pa], or pressure coefficients.
    """

    names: tuple[str, ...]
    runs: tuple[str, ...]
    columns: Mapping[str, tuple[str, ...]]
    """Every grouping column, "point", "run" and "config" among them where present."""
    alpha: Array
    channels: Mapping[str, Array]
    readings: Array
    t_total: Array | None = None
    nominal_alpha: Array | None = None
    nominal_mach: Array | None = None
    counts: NDArray[np.int64]
    """Rows of each point (P,)."""
    blocks: Callable[[], Iterator[Rows]] | None = None
    """Streams every row in file order, in bounded memory; None where every point has one row."""

    @property
    def keys(self) -> tuple[str, ...]:
        """RUN/POINT where there is a run, else POINT."""
        return tuple(f"{r}/{p}" if r else p for r, p in zip(self.runs, self.names, strict=True))


@dataclass(frozen=True, slots=True, kw_only=True)
class Closure:
    """A stated trailing-edge coefficient and its standard uncertainty."""

    cp: float
    standard: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Reduction:
    """How pressures become coefficients."""

    integration: Literal["contour-cubic", "contour-linear", "polygon"] = "contour-cubic"
    spacing: bool = True
    trailing_edge: Literal["rear taps", "extrapolate"] | Closure = "rear taps"
    compressibility: Literal["none", "prandtl-glauert", "karman-tsien", "laitone"] = "none"
    reference_mach: float = 0.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Intervals:
    """Level of confidence and the Monte Carlo plan: ``trials`` is "auto", a number, or "plain:N"."""

    level: float = 0.95
    trials: str = "auto"
    seed: int = 1


@dataclass(frozen=True, slots=True, kw_only=True)
class Campaign:
    """A whole campaign, checked."""

    name: str
    title: str
    folder: str
    section: Section
    taps: Taps
    pressures: str
    stream: str
    points: Points | None
    """None only for a campaign that has a forecast and no readings yet."""
    channels: Mapping[str, Channel]
    reduction: Reduction
    intervals: Intervals
    sources: tuple[Source, ...]
    plan: Plan = field(default_factory=Plan)
    warnings: tuple[str, ...] = ()
    inputs: Mapping[str, str] = field(default_factory=dict)
    """SHA-256 of each file read, by its path relative to the campaign's folder."""
    declared: str = ""
    """Text of the campaign file."""
