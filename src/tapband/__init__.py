"""Intervals on force coefficients integrated from surface pressure taps.

The names below are resolved on first use, so that ``tapband --version`` loads no array library.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from tapband.nouns.version import VERSION

if TYPE_CHECKING:
    from tapband.face import Campaign, Plan, Results, forecast, load, reduce, size
    from tapband.nouns.errors import TapbandError

__version__ = VERSION
__all__ = ["Campaign", "Plan", "Results", "TapbandError", "forecast", "load", "reduce", "size"]


def __getattr__(name: str) -> object:
    if name not in __all__:
        raise AttributeError(f"module 'tapband' has no attribute {name!r}")
    from importlib import import_module

    home = "tapband.nouns.errors" if name == "TapbandError" else "tapband.face"
    return getattr(import_module(home), name)


def __dir__() -> list[str]:
    return sorted([*__all__, "__version__"])
