"""The isentropic stream of a perfect gas, γ = 1.4, from whichever readings the tunnel gives.

Every function takes real or complex arrays, so that derivatives come by complex step.

*Source* NACA Report 1135 (1953), eqs 43-48.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

GAMMA = 1.4
GAS_CONSTANT = 287.053
"""Specific gas constant of dry air [J/(kg K)]; U.S. Standard Atmosphere, 1976."""
Values = NDArray[Any]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Stream:
    """State of the undisturbed stream: q [Pa], Mach number, p_static [Pa], and the pressure [Pa] to add to a
    tap reading to make it p − p_static."""

    q: Values
    mach: Values
    p_static: Values
    offset: Values


def theta(mach: Values) -> Values:
    """Total over static temperature."""
    return 1.0 + 0.2 * mach * mach


def mach_squared(excess: Values) -> Values:
    """M² from (p_total − p_static)/p_static, without cancellation at low speed."""
    return 5.0 * np.expm1(np.log1p(excess) / 3.5)


def total_excess(mach: Values) -> Values:
    """(p_total − p_static)/p_static."""
    return np.expm1(3.5 * np.log1p(0.2 * mach * mach))


def solve(
    arrangement: str,
    pressures: str,
    channels: Mapping[str, Values],
    mach_shift: Values | None = None,
    q_shift: Values | None = None,
) -> Stream:
    """The stream from its channels [Pa].

    ``mach_shift`` and ``q_shift`` [Pa] move a derived value; the state is then solved again at fixed p_total
    (total and static) or fixed p_static (difference and static). ``pressures`` says what tap readings are
    relative to.
    """
    if arrangement == "mach":
        one = np.ones_like(channels["mach"])
        return Stream(q=one, mach=channels["mach"], p_static=np.nan * one, offset=0.0 * one)
    if arrangement == "dynamic and mach":
        return _given(pressures, channels)
    static = channels["p_static"]
    gap = channels["p_total"] - static if arrangement == "total and static" else channels["p_difference"]
    m2 = mach_squared(gap / static)
    p = static
    if mach_shift is not None or q_shift is not None:
        fixed_total = arrangement == "total and static"
        m2, p = _shifted(m2, static, static + gap, fixed_total, mach_shift, q_shift)
    offset = _reference(pressures, channels, static, gap) - p
    return Stream(q=0.7 * p * m2, mach=np.sqrt(m2), p_static=p, offset=offset)


def _given(pressures: str, channels: Mapping[str, Values]) -> Stream:
    q, mach = channels["q"], channels["mach"]
    static = channels.get("p_static", q / (0.7 * mach * mach))
    gap = q * total_excess(mach) / (0.7 * mach * mach)
    return Stream(
        q=q, mach=mach, p_static=static, offset=_reference(pressures, channels, static, gap) - static
    )


def _reference(pressures: str, channels: Mapping[str, Values], static: Values, gap: Values) -> Values:
    """Absolute pressure that tap readings are relative to [Pa]."""
    match pressures:
        case "relative to vacuum":
            return 0.0 * static
        case "relative to static":
            return static
        case "relative to total":
            return static + gap
        case _:
            return channels[pressures.removeprefix("relative to ")]


def _shifted(
    m2: Values,
    static: Values,
    total: Values,
    fixed_total: bool,
    mach_shift: Values | None,
    q_shift: Values | None,
) -> tuple[Values, Values]:
    """M² and p_static after the derived Mach number, then the derived q, are moved."""
    if mach_shift is not None:
        m2 = (np.sqrt(m2) + mach_shift) ** 2
    if not fixed_total:
        return (m2 + q_shift / (0.7 * static) if q_shift is not None else m2), static
    if q_shift is not None:
        wanted = 0.7 * m2 * (1.0 + 0.2 * m2) ** -3.5 * total + q_shift
        for _ in range(12):
            t = 1.0 + 0.2 * m2
            q = 0.7 * m2 * t**-3.5 * total
            m2 = m2 - (q - wanted) / (0.7 * total * t**-3.5 * (1.0 - 0.7 * m2 / t))
    return m2, total * (1.0 + 0.2 * m2) ** -3.5


def stagnation_cp(mach: Values) -> Values:
    """Cp at a stagnation point."""
    return total_excess(mach) / (0.7 * mach * mach)


def critical_cp(mach: Values) -> Values:
    """Cp at which the local flow is sonic."""
    return (((theta(mach) / 1.2) ** 3.5) - 1.0) / (0.7 * mach * mach)


def vacuum_cp(mach: Values) -> Values:
    """Cp of a perfect vacuum."""
    return -1.0 / (0.7 * mach * mach)


def reynolds(mach: Values, p_static: Values, t_total: Values, chord: float) -> Values:
    """Reynolds number on the chord [m]; t_total [K].

    *Source* viscosity by Sutherland's law, U.S. Standard Atmosphere, 1976, eq. 51.
    """
    t = t_total / theta(mach)
    viscosity = 1.458e-6 * t**1.5 / (t + 110.4)
    density = p_static / (GAS_CONSTANT * t)
    return density * mach * np.sqrt(GAMMA * GAS_CONSTANT * t) * chord / viscosity
