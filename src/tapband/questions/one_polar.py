"""A fit that a user asks for by name, with a range of their own."""

from __future__ import annotations

from dataclasses import replace
from difflib import get_close_matches
from math import degrees

import numpy as np

from tapband.nouns.errors import QuestionError
from tapband.nouns.plan import Polar as Asked
from tapband.questions.fit import Fits, fitted
from tapband.questions.latents import Latents
from tapband.questions.polars import FEWEST, levels, polars


def fit_of(
    latents: Latents,
    name: str,
    asked: Asked,
    linear_range: tuple[float, float] | None,
    centre: float,
    level: float,
) -> Fits:
    """The polars of one run or config; ``linear_range`` [rad] overrides that of the campaign."""
    if linear_range is not None:
        asked = replace(asked, linear_range=_ordered(linear_range))
    named = np.array([name in pair for pair in zip(latents.runs, latents.configs, strict=True)]) & (
        name != ""
    )
    if not named.any():
        known = [each for each in dict.fromkeys((*latents.runs, *latents.configs)) if each]
        near = get_close_matches(name, known, n=3, cutoff=0.5) or known[:6]
        raise QuestionError(
            f'fit: must name a run or a config of the campaign; got "{name}"; try {", ".join(near)}'
        )
    everything = polars(latents, asked.same_angle)
    found = [one for one in everything if name in (one.run, one.config)]
    if not found:
        angles = _angles(latents, np.flatnonzero(named), asked.same_angle)
        raise QuestionError(
            f'fit: a polar needs {FEWEST} angles or more; got {angles} in "{name}"; add points, or compare them'
        )
    if asked.linear_range is not None:
        for one in found:
            _check_range(latents, one.points, one.level, asked.linear_range, name)
    return fitted(latents, found, asked, centre, level)


def _ordered(limits: tuple[float, float]) -> tuple[float, float]:
    low, high = limits
    if not low < high:
        raise QuestionError(
            "fit: the linear range must run from the lower to the higher angle; "
            f"got {degrees(low):g} to {degrees(high):g} deg; write the lower first"
        )
    return limits


def _angles(latents: Latents, points: np.ndarray, same_angle: float) -> int:
    return int(levels(np.sort(latents.alpha[points]), same_angle)[-1]) + 1


def _check_range(
    latents: Latents, points: np.ndarray, level: np.ndarray, limits: tuple[float, float], name: str
) -> None:
    alpha = latents.alpha[points]
    inside = (alpha >= limits[0] - 1e-9) & (alpha <= limits[1] + 1e-9)
    count = np.unique(level[inside]).size
    if count < FEWEST:
        raise QuestionError(
            f'fit: the linear range must hold {FEWEST} angles or more; got {count} of "{name}" between '
            f"{degrees(limits[0]):g} and {degrees(limits[1]):g} deg; widen it"
        )
