"""What a campaign asks beyond its coefficients: fits, decisions, targets, choices. SI units, radians."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import inf, radians

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.source import Source

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Polar:
    """``linear_range`` of angles [rad] (None: found); ``same_angle`` [rad] counts as one angle."""

    linear_range: tuple[float, float] | None = None
    same_angle: float = radians(0.1)


@dataclass(frozen=True, slots=True, kw_only=True)
class Limit:
    """A decision about the measured value of a coefficient (JCGM 106); ``guard`` in units of U."""

    coefficient: str
    lower: float = -inf
    upper: float = inf
    guard: float = 1.0
    alpha_range: tuple[float, float] | None = None
    points: tuple[str, ...] | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Target:
    """Largest expanded uncertainty wanted of a coefficient, at some points or angles [rad]."""

    coefficient: str
    expanded: float
    alpha_range: tuple[float, float] | None = None
    points: tuple[str, ...] | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class ExpectedTable:
    """The user's own expected pressures: angle [rad] (A,) and Cp (A, n) in tap-table order."""

    alpha: Array
    cp: Array


@dataclass(frozen=True, slots=True, kw_only=True)
class Forecast:
    """A test to come. Pressures [Pa], temperature [K], angles [rad], times [s].

    ``fluctuation`` is a fraction of the dynamic pressure (standard deviation in time); ``margin`` a
    fraction of the range each tap sees. ``expected`` None: inviscid flow.
    """

    alpha: tuple[float, ...]
    p_total: float
    t_total: float | None = None
    mach: float
    expected: ExpectedTable | None = None
    margin: float = 0.0
    fluctuation: float | None = None
    time_scale: float | None = None
    record: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Option:
    """One choice of a slot: cost, full scale [Pa] (None: unchanged) and complete replacement sources."""

    name: str
    cost: float
    full_scale: float | None = None
    sources: tuple[Source, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Slot:
    """A choice to be made; its options replace the named sources."""

    name: str
    replaces: tuple[str, ...]
    options: tuple[Option, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Layout:
    """A tap layout to be found; lengths in chords, ``rearmost`` x/c."""

    taps: int
    smallest_spacing: float = 0.0
    rearmost: float = 1.0
    fixed: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Wiring:
    """Modules to wire to, and their ports."""

    modules: int
    ports: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """All of it; ``lines`` maps each source name to its line in the campaign file."""

    polar: Polar = Polar()
    limits: tuple[Limit, ...] = ()
    targets: tuple[Target, ...] = ()
    forecast: Forecast | None = None
    slots: tuple[Slot, ...] = ()
    layout: Layout | None = None
    wiring: Wiring | None = None
    lines: Mapping[str, int] | None = None
