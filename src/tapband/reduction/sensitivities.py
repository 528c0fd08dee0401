"""Sensitivities of coefficients, Cp and stream to the latents of one family."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.jacobian import Jacobian
from tapband.reduction.loads import Entry, Loaded

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
CONDITIONS = ("alpha", "mach", "q")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class At:
    """Where the chain is differentiated: the points of one live set, cp (P, n) zero at dead taps, q (P,)."""

    points: Indices
    live: NDArray[np.bool_]
    cp: Array
    q: Array
    slopes: Jacobian


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Sensitivities:
    """∂y/∂ξ (P, m, G) and the variances of Cp (P, n; NaN at dead taps) and of alpha, M, q (P, 3)."""

    coefficients: Array
    cp_variance: Array
    condition_variance: Array


def sensitivities(loaded: Loaded, sets: Sequence[At], outputs: int, shape: tuple[int, ...]) -> Sensitivities:
    """Of one family at all points; ``shape`` is (P, n)."""
    count = len(loaded.family.members)
    coefficients = np.zeros((shape[0], outputs, count))
    conditions = np.zeros((shape[0], len(CONDITIONS), count))
    cp_variance = np.zeros(shape)
    for at in sets:
        i = at.points
        for entry in loaded.entries:
            part = entry.load[i]
            if entry.slot == "added":
                coefficients[i] += part
            elif entry.on_taps:
                by_tap = getattr(at.slopes, entry.slot) * part[:, None, :]
                coefficients[i] += _gathered(by_tap, entry.member, count)
            else:
                k = int(entry.member[0])
                coefficients[i, :, k] += at.slopes.scalars[entry.slot] * part[:, None]
                conditions[i, :, k] += _conditions(entry.slot, at.slopes, part)
        cp_variance[i] = np.where(at.live, _cp_variance(loaded.entries, at), np.nan)
    return Sensitivities(
        coefficients=coefficients,
        cp_variance=cp_variance,
        condition_variance=np.sum(conditions**2, axis=2),
    )


def _gathered(by_tap: Array, member: Indices, count: int) -> Array:
    """(P, m, G) from (P, m, n): the taps of one latent summed."""
    if count >= member.size and np.array_equal(member, np.arange(member.size)):
        return np.pad(by_tap, ((0, 0), (0, 0), (0, count - member.size)))
    return np.asarray(by_tap @ (member[:, None] == np.arange(count)).astype(np.float64))


def _conditions(slot: str, slopes: Jacobian, load: Array) -> Array:
    """(P, 3) what a scalar error adds to alpha, M and q."""
    result = np.zeros((load.size, len(CONDITIONS)))
    if slot == "alpha":
        result[:, 0] = load
    elif slot in slopes.stream:
        result[:, 1] = slopes.stream[slot].mach * load
        result[:, 2] = slopes.stream[slot].q * load
    return result


def _cp_variance(entries: Sequence[Entry], at: At) -> Array:
    """(P, n) variance of Cp at each tap; a latent that enters at tap and stream adds before it is squared."""
    own = np.zeros_like(at.cp)
    member = np.full(at.cp.shape[1], -1, dtype=np.int64)
    shared: dict[int, Array] = {}
    for entry in entries:
        load = entry.load[at.points]
        if entry.on_taps:
            own = own + load * _cp_by(entry.slot, at)
            member = entry.member
        elif entry.slot in at.slopes.stream:
            by = at.slopes.stream[entry.slot]
            moved = (by.offset[:, None] - at.cp * by.q[:, None]) / at.q[:, None] * load[:, None]
            k = int(entry.member[0])
            shared[k] = shared.get(k, np.zeros_like(at.cp)) + moved
    alone = ~np.isin(member, list(shared))
    variance = own**2 * alone
    for k, moved in shared.items():
        variance = variance + (moved + own * (member == k)) ** 2
    return np.asarray(variance)


def _cp_by(slot: str, at: At) -> Array | float:
    match slot:
        case "reading":
            return 1.0 / at.q[:, None]
        case "shift":
            return -at.slopes.cp_slope
        case _:
            return 1.0
