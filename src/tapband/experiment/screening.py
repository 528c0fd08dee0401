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
JUMP_FLOOR = 0.15
"""A jump smaller than this in Cp is never flagged (common practice, no source)."""
JUMP_RATIO = 6.0


def flags(
    rule: Quadrature, s: Array, cp: Array, cp_u: Array, mach: Array, reading: Array, full_scale: Array
) -> NDArray[np.object_]:
    """One text a point and tap (P, n), empty where nothing is wrong.

    cp, cp_u (P, n), mach (P,), reading (P, n) [Pa or Cp], s (n,), full_scale (n,) [Pa], NaN where unknown.
    A value is above stagnation, or past vacuum, by more than twice its standard uncertainty.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        slack = 2.0 * np.nan_to_num(cp_u) + 1e-6
        checks = (
            (ABOVE, cp > stagnation_cp(mach)[:, None] + slack),
            (VACUUM, cp < vacuum_cp(mach)[:, None] - slack),
            (FULL, np.abs(reading) >= full_scale * (1.0 - 1e-4)),
            (JUMP, jumps(rule, s, cp)),
        )
    text = np.full(cp.shape, "", dtype=object)
    for name, hit in checks:
        text[hit] = np.where(text[hit] == "", name, text[hit] + "; " + name)
    text[:, ~rule.live] = LEFT_OUT
    return text


def jumps(rule: Quadrature, s: Array, cp: Array) -> NDArray[np.bool_]:
    """(P, n) taps that stand off the line through their two neighbours far more than the taps around them.

    The standing-off of a tap is compared with the median of its four neighbours', so that a suction peak or a
    shock, where several taps stand off, is not flagged.
    """
    order = rule.order
    hit = np.zeros(cp.shape, dtype=np.bool_)
    if order.size < 7:
        return hit
    place, values = s[order], cp[:, order]
    t = (place[1:-1] - place[:-2]) / (place[2:] - place[:-2])
    off = np.zeros_like(values)
    off[:, 1:-1] = np.abs(values[:, 1:-1] - ((1.0 - t) * values[:, :-2] + t * values[:, 2:]))
    padded = np.pad(off, ((0, 0), (3, 3)), mode="edge")
    size = order.size
    # A bad reading lends its own jump to the two beside it: those one further out tell what is usual.
    around = np.stack([padded[:, k : k + size] for k in (0, 1, 5, 6)])
    usual = np.median(around, axis=0)
    beside = np.maximum(padded[:, 2 : 2 + size], padded[:, 4 : 4 + size])
    hit[:, order] = (off > JUMP_FLOOR) & (off > JUMP_RATIO * usual) & (off > 1.2 * beside)
    return hit
