"""Units at the edge: a number and a unit become SI. Common units come from a table, the rest from pint.

pint costs a third of a second to import and is asked only for a unit that the table lacks.

*Source* factors of the pressure units: NIST Special Publication 811 (2008), appendix B.8; among them the
three inches of water: at 4 °C (39.2 °F) 249.082 Pa, at 60 °F 248.84 Pa, conventional (1000 kg/m³ and
9.80665 m/s²) 249.0889 Pa.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import cache
from math import isfinite, pi
from typing import Any

from tapband.files.faults import RuleError, nearest, shown

PRESSURE, LENGTH, ANGLE, TEMPERATURE, TIME, NUMBER = (
    "pressure",
    "length",
    "angle",
    "temperature",
    "time",
    "number",
)
EXAMPLE = {PRESSURE: "Pa", LENGTH: "mm", ANGLE: "deg", TEMPERATURE: "K", TIME: "s"}
_OTHER = {PRESSURE: "kPa", LENGTH: "m", ANGLE: "rad", TEMPERATURE: "degC", TIME: "min"}
_PHRASE = {
    PRESSURE: "a pressure",
    LENGTH: "a length",
    ANGLE: "an angle",
    TEMPERATURE: "a temperature",
    TIME: "a time",
    NUMBER: "a plain number",
}


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit of one dimension: SI value = factor · (number + shift)."""

    dimension: str
    factor: float
    shift: float = 0.0

    def si(self, number: float) -> float:
        """The number in SI units."""
        return self.factor * (number + self.shift)


def _table() -> dict[str, Unit]:
    pressure = {
        "Pa": 1.0, "hPa": 1e2, "kPa": 1e3, "MPa": 1e6, "mPa": 1e-3, "N/m2": 1.0, "N/m^2": 1.0, "N/m²": 1.0,
        "bar": 1e5, "mbar": 1e2, "atm": 101325.0, "psi": 6894.757293168361, "psf": 47.88025898033584,
        "torr": 101325.0 / 760.0, "Torr": 101325.0 / 760.0, "mmHg": 133.322387415, "inHg": 3386.388640341,
        "inH2O_4C": 249.082, "inH2O_60F": 248.84, "inH2O_conventional": 249.08891, "mmH2O": 9.80665,
        "cmH2O": 98.0665,
    }  # fmt: skip
    length = {
        "m": 1.0, "mm": 1e-3, "cm": 1e-2, "um": 1e-6, "µm": 1e-6, "μm": 1e-6, "in": 0.0254, "inch": 0.0254,
        "ft": 0.3048,
    }  # fmt: skip
    degree = pi / 180.0
    angle = {
        "deg": degree, "degree": degree, "degrees": degree, "°": degree, "rad": 1.0, "mrad": 1e-3,
        "arcmin": degree / 60.0,
    }  # fmt: skip
    time = {"s": 1.0, "ms": 1e-3, "us": 1e-6, "µs": 1e-6, "min": 60.0, "h": 3600.0}
    table = {
        name: Unit(dimension, factor)
        for dimension, units in ((PRESSURE, pressure), (LENGTH, length), (ANGLE, angle), (TIME, time))
        for name, factor in units.items()
    }
    celsius, fahrenheit = Unit(TEMPERATURE, 1.0, 273.15), Unit(TEMPERATURE, 5.0 / 9.0, 459.67)
    table |= {"K": Unit(TEMPERATURE, 1.0), "degC": celsius, "°C": celsius, "degF": fahrenheit}
    return table | {"°F": fahrenheit, "degR": Unit(TEMPERATURE, 5.0 / 9.0)}


class UnknownUnitError(RuleError):
    """A unit that neither the table nor pint knows."""


TABLE = _table()
_WATER = re.compile(
    r"(in|inch|inches|in\.)[ _]?(of[ _])?(h2o|h₂o|wc|w\.c\.|wg|aq|water)|iwc|iwg", re.IGNORECASE
)
_GRAMMAR = re.compile(
    r"1?/?[A-Za-zµμ_Ω°]\w*((\*\*|\^)-?\d)?([*/· ]{1,2}[A-Za-zµμ_Ω°]\w*((\*\*|\^)-?\d)?){0,5}"
)


@cache
def unit(text: str) -> Unit:
    """The unit of this name.

    Raises :class:`RuleError` for an unknown unit, and for an inch of water that does not say which.
    """
    if text in TABLE:
        return TABLE[text]
    if _WATER.fullmatch(text):
        raise RuleError(
            "must say which inch of water: three in use differ by up to 0.1 %",
            shown(text),
            'write "inH2O_4C" (249.082 Pa), "inH2O_60F" (248.84 Pa) or "inH2O_conventional" (249.0889 Pa)',
        )
    found = _ask_pint(text) if len(text) <= 60 and _GRAMMAR.fullmatch(text) else None
    if found is None:
        near = nearest(text, TABLE)
        do = f'write "{near}"' if near else 'write a unit such as "Pa", "kPa", "mm", "deg" or "K"'
        raise UnknownUnitError("has a unit that is not known", shown(text), do)
    return found


def _ask_pint(text: str) -> Unit | None:
    """The unit by pint, None where pint knows none or its dimension has no use here."""
    registry = _registry()
    try:
        one, two = (
            registry.Quantity(number, registry.parse_units(text)).to_base_units() for number in (1.0, 2.0)
        )
        dimension = _DIMENSIONS.get(str(one.dimensionality))
    except Exception:  # pint raises what its tokenizer, Python's or its own definitions raise
        return None
    if dimension is None:
        return None
    factor = float(two.magnitude - one.magnitude)
    shift = float(one.magnitude) / factor - 1.0
    return Unit(dimension, factor, shift if dimension == TEMPERATURE else 0.0)


_DIMENSIONS = {
    "[mass] / [length] / [time] ** 2": PRESSURE, "[length]": LENGTH, "[temperature]": TEMPERATURE,
    "[time]": TIME,
}  # fmt: skip


@cache
def _registry() -> Any:
    import pint

    registry: Any = pint.UnitRegistry(autoconvert_offset_to_baseunit=True)
    return registry


_NUMBER = re.compile(r"\s*([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*(.*?)\s*", re.DOTALL)


_COMMA = re.compile(r"\s*[+-]?\d*,\d")


def split(value: object) -> tuple[float, str]:
    """The number and the unit text (may be empty) of a value such as ``"35 Pa"`` or ``35``."""
    if isinstance(value, bool) or not isinstance(value, (int, float, str)):
        raise RuleError("must be a number with its unit in quotes", shown(value), 'write for example "35 Pa"')
    if isinstance(value, str):
        match = _NUMBER.fullmatch(value)
        if value.strip()[:1] == "±":
            raise RuleError("takes no ± sign", shown(value), f"write {shown(value.strip()[1:].strip())}")
        if _COMMA.match(value):
            raise RuleError(
                "takes a decimal point", shown(value), f"write {shown(value.replace(',', '.', 1))}"
            )
        if match is None:
            raise RuleError("must begin with a number", shown(value), 'write for example "35 Pa"')
        number, rest = float(match[1]), match[2]
    else:
        number, rest = _as_float(value), ""
    if not isfinite(number):
        raise RuleError("must be finite", shown(value), "write a finite number")
    return number, rest


def _as_float(value: float) -> float:
    """A TOML number as a float: an integer past the range of floats counts as infinite."""
    try:
        return float(value)
    except OverflowError:
        return float("inf")


def bare(number: float) -> str:
    """A number as one would write it."""
    return f"{number:.12g}"


def quantity(value: object, dimension: str, *, also: str = "") -> float:
    """A size of one dimension in SI units; ``also`` is a second way to write it, for the message."""
    number, name = split(value)
    if dimension == NUMBER:
        if name:
            raise RuleError("takes a plain number", shown(value), f'write "{bare(number)}"')
        return number
    example = f'"{bare(number)} {EXAMPLE[dimension]}"' + (f" or {also}" if also else "")
    if not name:
        either = f'"{bare(number)} {EXAMPLE[dimension]}" or "{bare(number)} {_OTHER[dimension]}"'
        do = f"write the unit that is meant, as in {either}" + (f", or {also}" if also else "")
        raise RuleError("needs a unit", shown(value), do)
    if name.startswith("%"):
        raise RuleError(f"must be {_PHRASE[dimension]}", shown(value), f"write {example}")
    try:
        found = unit(name)
    except UnknownUnitError as error:
        near = nearest(name, [unit for unit, its in TABLE.items() if its.dimension == dimension])
        do = f'write "{bare(number)} {near}"' if near else f"write {example}"
        raise RuleError(error.rule, shown(value), do) from None
    except RuleError as error:
        raise RuleError(error.rule, shown(value), error.do) from None
    if found.dimension != dimension:
        raise RuleError(f"must be {_PHRASE[dimension]}", shown(value), f"write {example}")
    return found.si(number)


def fraction(value: object) -> float:
    """A fraction: ``"25 %"`` or ``0.25``."""
    number, name = split(value)
    if name not in {"", "%"}:
        raise RuleError("takes per cent or a plain fraction", shown(value), f'write "{bare(number)} %"')
    return number / 100.0 if name else number


def chords(value: object, chord: float) -> float:
    """A length in chords: a plain number is a fraction of the chord, a length is divided by it [m]."""
    number, name = split(value)
    if name in {"", "c", "chord", "chords"}:
        return number
    if re.fullmatch(r"%\s*(of\s+)?chord", name):
        return number / 100.0
    return quantity(value, LENGTH, also=f'"{bare(number)}" (fractions of the chord)') / chord
