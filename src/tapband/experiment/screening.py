"""Readings that look wrong are flagged, never dropped."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.quadrature import Quadrature
from tapband.experiment.stream import stagnation_cp, vacuum_cp

Array = NDArray[np.float64]
ABOVE, VACUUM, FULL, JUMP, LEFT_OUT = (
    "above stagnation",
    "past vacuum",
    "at full scale",
    "jump against its neighbours",
    "left out",
)
SUSPICIONS = (ABOVE, VACUUM, FULL, JUMP)
JUMP_FLOOR = 0.15
"""A jump smaller than this in Cp is never flagged (common practice, no source)."""
JUMP_SPAN = 2.0
"""Nor one smaller than so many ranges of the taps around (common practice, no source)."""
JUMP_RATIO = 6.0
"""Nor one smaller than so many times what is usual further out (common practice, no source)."""


def flags(
    rule: Quadrature,
    s: Array,
    cp: Array,
    cp_u: Array,
    mach: Array,
    reading: Array,
    full_scale: Array,
    absolute: Array,
) -> NDArray[np.object_]:
    """One text a point and tap (P, n), empty where nothing is wrong.

    cp, cp_u (P, n), mach (P,), reading (P, n) [Pa or Cp], s (n,), full_scale (n,) [Pa], NaN where unknown.
    ``absolute`` (P, n) [Pa] is the pressure itself, NaN where unknown. A value is above stagnation, or past
    vacuum, by more than twice its standard uncertainty; a negative pressure is past vacuum in any case.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        slack = 2.0 * np.nan_to_num(cp_u) + 1e-6
        checks = (
            (ABOVE, cp > stagnation_cp(mach)[:, None] + slack),
            (VACUUM, (cp < vacuum_cp(mach)[:, None] - slack) | (absolute < 0.0)),
            (FULL, np.abs(reading) >= full_scale * (1.0 - 1e-4)),
            (JUMP, jumps(rule, s, cp)),
        )
    text = np.full(cp.shape, "", dtype=object)
    for name, hit in checks:
        text[hit] = np.where(text[hit] == "", name, text[hit] + "; " + name)
    text[:, ~rule.live] = LEFT_OUT
    return text


def jumps(rule: Quadrature, s: Array, cp: Array) -> NDArray[np.bool_]:
    """(P, n) taps that stand off the line through their two neighbours more than the flow around explains.

    The distance is held against the range that the four taps around span without it, and against the distances
    of taps further out, so that a stagnation point, a suction peak or a shock is not flagged.
    """
    order = rule.order
    hit = np.zeros(cp.shape, dtype=np.bool_)
    if order.size < 7:
        return hit
    place, values = s[order], cp[:, order]
    t = (place[1:-1] - place[:-2]) / (place[2:] - place[:-2])
    off = np.zeros_like(values)
    off[:, 1:-1] = np.abs(values[:, 1:-1] - ((1.0 - t) * values[:, :-2] + t * values[:, 2:]))
    around = _neighbours(values, (-2, -1, 1, 2))
    span = around.max(axis=0) - around.min(axis=0)
    # A bad reading lends half its own jump to the two beside it: those further out tell what is usual.
    usual = np.median(_neighbours(off, (-3, -2, 2, 3)), axis=0)
    beside = _neighbours(off, (-1, 1)).max(axis=0)
    enough = np.maximum(JUMP_FLOOR, JUMP_SPAN * span)
    hit[:, order] = (off > enough) & (off > JUMP_RATIO * usual) & (off > 1.2 * beside)
    return hit


def _neighbours(values: Array, steps: tuple[int, ...]) -> Array:
    """(k, P, n) values so many taps away along the contour, the ends repeated."""
    reach = max(abs(step) for step in steps)
    padded = np.pad(values, ((0, 0), (reach, reach)), mode="edge")
    size = values.shape[1]
    return np.stack([padded[:, reach + step : reach + step + size] for step in steps])
