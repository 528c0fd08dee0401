"""The point at which everything is linearised: readings and stream with the declared corrections applied."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.stream import solve
from tapband.nouns.campaign import Campaign, Points
from tapband.nouns.symbols import MEASURED

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

SLOT_OF = {
    "tap pressure": "reading",
    "tap location": "shift",
    "tap row": "shift",
    "tap coefficient": "extra",
    "total pressure": "p_total",
    "static pressure": "p_static",
    "pressure difference": "p_difference",
    "angle": "alpha",
    "chord": "length",
    "moment centre": "centre",
    "trailing-edge coefficient": "edge_common",
}
"""Slot of the chain that each act moves; an act that is not here is a slot of its own name, or a coefficient."""
ON_TAPS = frozenset({"reading", "shift", "extra"})
"""Slots with one value a tap."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Nominal:
    """Readings as tabulated, and what the acts of sources refer to. P points, n taps, m coefficients."""

    reading: Array
    """(P, n) as in the table; NaN at dead taps."""
    live: Mask
    """(P, n)."""
    channels: Mapping[str, Array]
    alpha: Array
    mach: Array
    q: Array
    cp: Array
    tangent_x: Array
    """(n,) ∂x/∂s at the taps."""
    x: Array
    reference_channel: str | None
    arrangement: str
    factor: Array | None
    """(P,) Prandtl-Glauert factor to the reference Mach number; None without a rule."""

    def slot(self, act: str) -> tuple[str, Array]:
        """Slot of the chain that an act moves, and the reading (P,) or (P, n) its % refers to."""
        name = SLOT_OF.get(act, act)
        if act == "reference pressure":
            name = self.reference_channel or ""
        elif act in ("mach", "dynamic pressure"):
            direct = self.arrangement in ("dynamic and mach", "mach")
            name, shift = ("mach", "mach_shift") if act == "mach" else ("q", "q_shift")
            name = name if direct else shift
        if name in self.channels:
            return name, self.channels[name]
        derived = {"mach_shift": self.mach, "q_shift": self.q, "alpha": self.alpha}
        return name, derived.get(name, np.zeros_like(self.alpha))

    def tap_reading(self, act: str) -> Array:
        """(P, n) the number that "% of reading" multiplies."""
        if act == "tap pressure":
            return np.nan_to_num(self.reading)
        return np.nan_to_num(self.cp) if act == "tap coefficient" else np.zeros_like(self.cp)

    def added_rows(self, coefficient: str, size: Array) -> Array:
        """(P, m, 1) loads of an error known only in one coefficient, its reference value included."""
        outputs = len(MEASURED) * (1 if self.factor is None else 2)
        rows = np.zeros((size.size, outputs, 1))
        index = MEASURED.index(coefficient)
        rows[:, index, 0] = size
        if self.factor is not None:
            rows[:, len(MEASURED) + index, 0] = size * self.factor
        return rows


def nominal_of(campaign: Campaign, points: Points, tangent_x: Array) -> Nominal:
    """Nominal state of the points."""
    live = np.isfinite(points.readings) & ~campaign.taps.excluded
    stream = solve(campaign.stream, campaign.pressures, points.channels)
    cp = (points.readings + stream.offset[:, None]) / stream.q[:, None]
    reduction = campaign.reduction
    factor = None
    if reduction.compressibility != "none":
        factor = np.sqrt((1.0 - stream.mach**2) / (1.0 - reduction.reference_mach**2))
    reference = campaign.pressures.removeprefix("relative to ")
    return Nominal(
        reading=np.where(live, points.readings, np.nan),
        live=live,
        channels=points.channels,
        alpha=points.alpha,
        mach=stream.mach,
        q=stream.q,
        cp=np.where(live, cp, np.nan),
        tangent_x=tangent_x,
        x=campaign.taps.x,
        reference_channel=reference if reference in points.channels else None,
        arrangement=campaign.stream,
        factor=factor,
    )
