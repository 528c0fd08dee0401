"""Text from campaigns made inert: names may hold formulas, markup, line breaks or terminal codes."""

from __future__ import annotations

import re

_BREAKS = re.compile(r"\r\n|[\n\r\v\f\x1c-\x1e\x85\u2028\u2029]")
_CONTROLS = re.compile(r"[\x00-\x08\x0e-\x1f\x7f-\x9f\ud800-\udfff]")
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")
_FORMULA = "=+-@\t\r" + "＝＋－＠"
"""First characters after which a spreadsheet reads a cell as a formula; some read the full-width ones too."""


def one_line(text: str) -> str:
    """The text on one line: line breaks become spaces, other control characters go."""
    return _CONTROLS.sub("", _BREAKS.sub(" ", text))


def defused(text: str) -> str:
    """The text as one line that no spreadsheet reads as a formula: a leading apostrophe marks it as text.

    A plain signed number is left alone: read as a number it does no harm, and points are often so named.
    """
    line = one_line(text)
    lead = line.lstrip(" \xa0\ufeff\u200b")
    risky = text[:1] in ("\t", "\r") or lead[:1] in tuple(_FORMULA)
    return "'" + line if risky and not _NUMBER.fullmatch(line) else line


def printable(text: str) -> str:
    """The text with line breaks kept and every other control character gone, fit for a terminal."""
    return "\n".join(_CONTROLS.sub("", line) for line in text.splitlines())
