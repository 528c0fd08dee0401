"""The campaigns that are timed: exact flow about a 12 % section, 60 taps, about 130 latents."""

from __future__ import annotations

import sys
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[2] / "tests"))

from campaigns import TWELVE, campaign, size, source
from exact_sections import TapPlaces
from tapband.nouns.campaign import Campaign
from tapband.nouns.source import COMMON, INDEPENDENT, Scale, Shape, Size, Source

RECT = Shape.RECTANGULAR


def taps(count: int = 60) -> TapPlaces:
    """Half of them on each surface, cosine-spaced to 0.98 chords, none at the nose."""
    half = count // 2
    x = 0.49 * (1.0 - np.cos(np.pi * np.arange(1, half + 1) / half))
    return TWELVE.taps_at(np.concatenate([x[::-1], x]), np.arange(2 * half) >= half)


def normal() -> tuple[Source, ...]:
    """Normal errors dominate: ports of 4 Pa at q = 6 kPa, tap locations of 0.05 mm on 400 mm."""
    return (
        source("port zero", "tap pressure", size(4.0), INDEPENDENT, INDEPENDENT),
        source("module zero", "tap pressure", size(3.0, RECT), "by run", "by module"),
        source("module gain", "tap pressure", size(0.0005, scale=Scale.READING), COMMON, "by module"),
        source("tap location", "tap location", size(1.25e-4), COMMON, INDEPENDENT),
        source("total", "total pressure", size(8.0), INDEPENDENT),
        source("static", "static pressure", size(6.0), "by run"),
        source("angle", "angle", size(np.radians(0.03)), COMMON),
    )


def curved() -> tuple[Source, ...]:
    """Rectangular and shared errors, large enough to bend the coefficients visibly."""
    return (
        source("module zero", "tap pressure", size(30.0, RECT), "by run", "by module"),
        source("port zero", "tap pressure", size(4.0, RECT), INDEPENDENT, INDEPENDENT),
        source("module gain", "tap pressure", size(0.01, RECT, Scale.READING), COMMON, "by module"),
        source("tap location", "tap location", size(3e-4, RECT), COMMON, INDEPENDENT),
        source("dynamic", "dynamic pressure", size(300.0, RECT), COMMON),
        source("angle", "angle", size(np.radians(0.3), RECT), COMMON),
    )


def times(sources: Sequence[Source], factor: float) -> tuple[Source, ...]:
    """All sizes times a factor."""
    return tuple(replace(one, size=_times(one.size, factor)) for one in sources)


def _times(whole: Size, factor: float) -> Size:
    terms = (replace(term, lower=factor * term.lower, upper=factor * term.upper) for term in whole.terms)
    return replace(whole, terms=tuple(terms))


def polar(
    points: int,
    count: int = 60,
    sources: Sequence[Source] | None = None,
    *,
    trials: str = "auto",
    **more: object,
) -> Campaign:
    """Points from −4 to 10°, twenty a run."""
    return campaign(
        normal() if sources is None else sources,
        taps=taps(count),
        alphas=np.linspace(-4.0, 10.0, points).tolist() if points > 1 else [4.0],
        runs=[f"R{i // 20}" for i in range(points)],
        pressures="relative to static",
        trials=trials,
        **more,
    )
