"""Points that make one polar, and how far apart their random errors put them.

A polar is what one run holds of one config at one Mach number, in order of angle; or one config pooled over
its runs.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.questions.latents import Latents

Array = NDArray[np.float64]
Codes = NDArray[np.int64]
MACH_GAP = 0.01
"""A gap in Mach number larger than this parts two polars."""
FEWEST = 3


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Polar:
    """Points (n,) of one polar in order of angle; ``run`` is empty where several are pooled."""

    run: str
    config: str
    points: Codes
    level: Codes
    """(n,) number of the distinct angle."""
    mach: float
    one_of_several: bool
    """Whether run and config hold polars at other Mach numbers too."""


def levels(alpha: Array, within: float) -> Codes:
    """Numbers (n,) of the distinct angles among ordered ones; those within a tolerance [rad] are one."""
    result = np.zeros(alpha.size, dtype=np.int64)
    start = alpha[0] if alpha.size else 0.0
    for i in range(1, alpha.size):
        apart = alpha[i] - start > within
        result[i] = result[i - 1] + apart
        start = alpha[i] if apart else start
    return result


def polars(latents: Latents, within: float) -> tuple[Polar, ...]:
    """Every polar of at least three angles, runs first, then configs pooled over their runs.

    Angles within a tolerance [rad] are one.
    """
    pairs = dict.fromkeys(zip(latents.runs, latents.configs, strict=True))
    runs, configs = np.array(latents.runs, dtype=object), np.array(latents.configs, dtype=object)
    found: list[Polar] = []
    for run, config in pairs:
        mine = np.flatnonzero((runs == run) & (configs == config))
        found += _at_each_mach(latents, run, config, mine, within)
    for config in dict.fromkeys(latents.configs):
        mine = np.flatnonzero(configs == config)
        if config and len(set(runs[mine])) > 1:
            found += _at_each_mach(latents, "", config, mine, within)
    return tuple(found)


def _at_each_mach(latents: Latents, run: str, config: str, points: Codes, within: float) -> Iterator[Polar]:
    """Polars of at least three angles with a value each, split at gaps in Mach number."""
    known = points[np.isfinite(latents.estimate[points][:, :5]).all(axis=1)]
    by_mach = known[np.argsort(latents.mach[known], kind="stable")]
    parts = np.split(by_mach, np.flatnonzero(np.diff(latents.mach[by_mach]) > MACH_GAP) + 1)
    for part in parts:
        ordered = part[np.argsort(latents.alpha[part], kind="stable")]
        level = levels(latents.alpha[ordered], within)
        if level.size and level[-1] + 1 >= FEWEST:
            yield Polar(
                run=run,
                config=config,
                points=ordered,
                level=level,
                mach=float(np.mean(latents.mach[part])),
                one_of_several=len(parts) > 1,
            )


def random_variance(latents: Latents, points: Codes, output: int, slope: float) -> Array:
    """(n,) variance of one coefficient from sources drawn anew at every point, alpha's part along ``slope``.

    The effective variance of a straight-line fit with errors in both coordinates: var(y − slope·alpha).

    *Source* J. Orear, Am. J. Phys. 50 (1982) 912, from memory.
    """
    total = np.zeros(points.size)
    for s in np.flatnonzero(latents.random).tolist():
        own = latents.sensitivity[s][points, output]
        if s in latents.on_alpha:
            own = own - slope * latents.on_alpha[s][points]
        total += (own * own).sum(axis=1)
    return total


def smoothed(alpha: Array, variance: Array) -> Array:
    """The variance (n,) as a parabola in the angle, never under a tenth of its mean.

    A reading's own error must not choose its weight: a size in % of reading, or a scatter of few samples,
    would pull the fit towards the readings that came out low or quiet.
    """
    mean = float(variance.mean())
    if mean == 0.0:
        return np.ones_like(variance)
    if variance.size < 6 or np.ptp(variance) < 1e-9 * mean:
        return np.full_like(variance, mean)
    x = (alpha - alpha.mean()) / np.ptp(alpha)
    basis = np.stack([np.ones_like(x), x, x * x], axis=1)
    return np.asarray(np.maximum(basis @ np.linalg.lstsq(basis, variance, rcond=None)[0], 0.1 * mean))
