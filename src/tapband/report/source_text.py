"""Sources as campaign-file text with their sizes left open, for the page to write changed ones.

A template is a list of pieces: text, or ``{"c": centre, "n": size}`` for the number centre + factor · size.
The text is that of the campaign file's own keys, so what a source shares and acts on stays as declared.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from tapband.nouns.campaign import Campaign

Piece = str | dict[str, float]
SIZES = ("standard", "expanded", "limits", "resolution")
_NUMBER = re.compile(r"\s*([+-]?(?:\d[\d_]*\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*(.*)", re.S)


def templates(campaign: Campaign) -> dict[str, list[Piece]]:
    """A template for every declared source whose size can be scaled in its own words."""
    try:
        declared = tomllib.loads(campaign.declared).get("source", [])
    except tomllib.TOMLDecodeError:
        return {}
    made = {str(entry.get("name")): _template(entry) for entry in declared if isinstance(entry, dict)}
    return {name: pieces for name, pieces in made.items() if pieces is not None}


def _template(entry: Mapping[str, object]) -> list[Piece] | None:
    ends = _ends(entry)
    pieces: list[Piece] = ["[[source]]\n"]
    for key, value in entry.items():
        sized = _sized(value) if key in SIZES else ends.get(key)
        if key in (*SIZES, "lower", "upper") and sized is None:
            return None
        pieces += [f"{key} = ", *(sized or [_toml(value)]), "\n"]
    return pieces


def _sized(value: object) -> list[Piece] | None:
    """The value with its numbers open: "0.03 deg", 0.03, or a list of such."""
    if isinstance(value, list):
        parts = [_sized(item) for item in value]
        if any(part is None for part in parts):
            return None
        inner = [piece for part in parts if part for piece in (", ", *part)][1:]
        return ["[", *inner, "]"]
    split = _split(value)
    if split is None:
        return None
    number, unit = split
    return [*_quoted(0.0, number, unit)] if isinstance(value, str) else [{"c": 0.0, "n": number}]


def _ends(entry: Mapping[str, object]) -> dict[str, list[Piece]]:
    """``lower`` and ``upper`` about their middle, which stays: it is a correction, not a doubt."""
    lower, upper = _split(entry.get("lower")), _split(entry.get("upper"))
    if lower is None or upper is None or (lower[1] != upper[1] and lower[0] * upper[0] != 0.0):
        return {}
    unit = lower[1] if lower[0] != 0.0 or upper[0] == 0.0 else upper[1]
    middle, half = 0.5 * (lower[0] + upper[0]), 0.5 * (upper[0] - lower[0])
    text = isinstance(entry["lower"], str) or isinstance(entry["upper"], str)
    ends = {"lower": -half, "upper": half}
    return {k: _quoted(middle, n, unit) if text else [{"c": middle, "n": n}] for k, n in ends.items()}


def _quoted(centre: float, number: float, unit: str) -> list[Piece]:
    return ['"', {"c": centre, "n": number}, f'{" " if unit else ""}{_escaped(unit)}"']


def _split(value: object) -> tuple[float, str] | None:
    """Number and unit of a size."""
    if isinstance(value, bool):
        return None
    if isinstance(value, int | float):
        return float(value), ""
    match = _NUMBER.fullmatch(value) if isinstance(value, str) else None
    return (float(match[1].replace("_", "")), match[2].strip()) if match else None


def _toml(value: object) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int | float):
        return repr(value)
    if isinstance(value, list):
        return f"[{', '.join(_toml(item) for item in value)}]"
    return f'"{_escaped(str(value))}"'


def _escaped(text: str) -> str:
    """The inside of a TOML basic string."""
    plain = text.replace("\\", "\\\\").replace('"', '\\"')
    return "".join(c if c.isprintable() else f"\\U{ord(c):08X}" for c in plain)
