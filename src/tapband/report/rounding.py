"""Numbers as a reader wants them: an uncertainty to two digits, the estimate to the same place."""

from __future__ import annotations

from math import floor, isfinite, log10

MISSING = "–"
RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def decimals(uncertainty: float, digits: int = 2) -> int:
    """Decimal places that show ``uncertainty`` with so many significant digits (JCGM 100, 7.2.6)."""
    if not isfinite(uncertainty) or uncertainty <= 0.0:
        return 4
    shown = float(f"{uncertainty:.{digits - 1}e}")  # 0.00996 rounds up to 0.010 first
    return min(max(digits - 1 - floor(log10(shown)), 0), 12)


def fixed(value: float, places: int) -> str:
    """The value with so many decimal places and a true minus sign; a dash where there is none."""
    if not isfinite(value):
        return MISSING
    text = f"{value:.{places}f}"
    return text.removeprefix("-") if float(text) == 0.0 else text.replace("-", "\N{MINUS SIGN}")


def plus_minus(value: float, half: float) -> str:
    """``value ± half``."""
    places = decimals(half)
    return f"{fixed(value, places)} ± {fixed(half, places)}" if isfinite(half) else fixed(value, 4)


def significant(value: float, digits: int = 3) -> str:
    """The value to so many significant digits, without an exponent where that reads well."""
    if not isfinite(value):
        return MISSING
    if value == 0.0:
        return "0"
    if 1e-4 <= abs(value) < 1e6:
        return fixed(value, max(digits - 1 - floor(log10(abs(float(f"{value:.{digits - 1}e}")))), 0))
    head, power = f"{value:.{digits - 1}e}".split("e")
    return f"{head}×10{str(int(power)).translate(RAISED)}".replace("-", "\N{MINUS SIGN}")
