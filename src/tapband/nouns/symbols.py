"""The one table of symbols: name in code and tables, symbol in print, unit, meaning."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class Symbol:
    """A quantity. ``unit`` is that of the tables that go out ("1" where it has none)."""

    name: str
    symbol: str
    unit: str
    meaning: str


def _table(*rows: tuple[str, str, str, str]) -> dict[str, Symbol]:
    return {name: Symbol(name=name, symbol=s, unit=unit, meaning=text) for name, s, unit, text in rows}


MEASURED = ("cn", "ct", "cm", "cl", "cd_pressure")
"""The coefficients as measured, in the order of every table."""

QUANTITIES = _table(
    ("cn", "cn", "1", "force coefficient normal to the chord"),
    ("ct", "ct", "1", "force coefficient along the chord, positive towards the trailing edge"),
    ("cm", "cm", "1", "moment coefficient about the moment centre, positive nose-up"),
    ("cl", "cl", "1", "lift coefficient"),
    ("cd_pressure", "cd,p", "1", "drag coefficient of the pressures alone, without friction"),
    ("cp", "Cp", "1", "pressure coefficient (p − p∞)/q"),
    ("alpha", "α", "deg", "angle of attack"),
    ("mach", "M", "1", "Mach number of the stream"),
    ("q", "q", "Pa", "dynamic pressure"),
    ("p_total", "p0", "Pa", "total pressure"),
    ("p_static", "p∞", "Pa", "static pressure of the stream"),
    ("p_difference", "p0 − p∞", "Pa", "total minus static pressure"),
    ("t_total", "T0", "K", "total temperature"),
    ("reynolds", "Re", "1", "Reynolds number on the chord"),
    ("x", "x/c", "chord", "station along the chord, from the nose"),
    ("y", "y/c", "chord", "height above the chord line"),
    ("s", "s/c", "chord", "arc length from the nose, upper surface positive"),
    ("taps_used", "n", "1", "number of live taps"),
)
"""Quantities of the experiment."""

ENDINGS = _table(
    ("", "y", "=", "estimate"),
    ("_u", "u", "=", "combined standard uncertainty, linearised"),
    ("_b", "u_b", "=", "its systematic part: sources that points share"),
    ("_s", "u_s", "=", "its random part: sources of one point alone"),
    ("_dof", "ν", "1", "effective degrees of freedom; empty: infinite"),
    ("_k", "k", "1", "coverage factor"),
    ("_U", "U", "=", "expanded uncertainty, linearised"),
    ("_low", "y − U", "=", "lower end of the linearised interval"),
    ("_high", "y + U", "=", "upper end of the linearised interval"),
    ("_mc", "ȳ", "=", "Monte Carlo mean"),
    ("_mc_u", "s(y)", "=", "Monte Carlo standard deviation; empty where it does not exist"),
    ("_mc_low", "y_low", "=", "lower end of the Monte Carlo interval, probabilistically symmetric"),
    ("_mc_high", "y_high", "=", "upper end of the Monte Carlo interval, probabilistically symmetric"),
    ("_short_low", "y_low", "=", "lower end of the shortest Monte Carlo interval"),
    ("_short_high", "y_high", "=", "upper end of the shortest Monte Carlo interval"),
    ("_agrees", "", "", "whether Monte Carlo confirms the linearised interval (JCGM 101, clause 8)"),
)
"""What follows the name of a coefficient; unit "=": that of the coefficient."""

CONDITIONS = {
    "": "as measured, at the angle and Mach number of the point",
    "_ref": "at the reference Mach number",
    "_stated": "at the nominal condition",
}
"""Where a coefficient is quoted; stands between its name and the ending."""
