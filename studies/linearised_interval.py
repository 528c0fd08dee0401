"""Does the linearised interval hold up?

A campaign with errors of every common kind (ports, modules, gain, tap locations, stream, angle) about a 12 % section
at −2, 4 and 10°; all sizes multiplied by 1/4 to 32, the automatic terms for the trailing edge as they are. By plain
Monte Carlo through the same chain: the share of trials inside the linearised 95 % interval, and how far an end is
off, in units of U.

*Answer* at the sizes a careful test has (factor 1) and up to eight times those, yes: the share is within one per
cent of 95 % and ends are off by at most 6 % of U. Two things go wrong outside. Where everything else is so small that
one rectangular error is all that counts (rear loading in cm at a quarter of the sizes), the interval is too wide and
holds more than 99 %. Where errors are so large that the equation bends (32 times), ends are off by a tenth of U in
lift and a quarter in moment and pressure drag; the share still exceeds 90 %, for one end loses what the other gains.

    python studies/linearised_interval.py
"""

from __future__ import annotations

import sys
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

sys.path.insert(0, str(Path(__file__).parents[1] / "tests"))

from study_figure import drawn, look

from campaigns import TWELVE, campaign, size, source
from tapband.nouns.source import COMMON, INDEPENDENT, Scale, Shape, Source
from tapband.probability.linearised import propagate
from tapband.probability.montecarlo import sample
from tapband.reduction import assemble

Array = NDArray[np.float64]
FACTORS = (0.25, 0.5, 1.0, 2.0, 4.0, 8.0, 16.0, 32.0)
NAMES = ("cl", "cm", "cd_pressure")
COLUMNS = [3, 2, 4]
LEVEL = 0.95


@dataclass(frozen=True, slots=True, kw_only=True)
class Found:
    """By factor, over the angles: the share held furthest from the level, and the largest error of an end over U."""

    factors: Sequence[float]
    held: Array
    """(factors, 3)"""
    off: Array
    trials: int


def sources(factor: float) -> tuple[Source, ...]:
    """The errors of a careful test, all sizes times ``factor``."""
    rect = Shape.RECTANGULAR
    made = (
        source("port zero", "tap pressure", size(1.5), INDEPENDENT, INDEPENDENT),
        source("module zero", "tap pressure", size(2.0, rect), COMMON, "by module"),
        source("gain", "tap pressure", size(0.0005, rect, Scale.READING), COMMON, "by module"),
        source("tap location", "tap location", size(1.5e-4), COMMON, INDEPENDENT),
        source("total", "total pressure", size(4.0), INDEPENDENT),
        source("static", "static pressure", size(4.0, rect), COMMON),
        source("angle", "angle", size(np.radians(0.03)), COMMON),
    )
    return tuple(_times(one, factor) for one in made)


def _times(one: Source, factor: float) -> Source:
    terms = tuple(replace(t, lower=factor * t.lower, upper=factor * t.upper) for t in one.size.terms)
    return replace(one, size=replace(one.size, terms=terms))


def find(factors: Sequence[float] = FACTORS, tiles: int = 20) -> Found:
    """At each factor, by ``tiles`` times 10,000 plain trials."""
    held, off = zip(*[_at(factor, tiles) for factor in factors], strict=True)
    return Found(factors=factors, held=np.array(held), off=np.array(off), trials=10_000 * tiles)


def _at(factor: float, tiles: int) -> tuple[Array, Array]:
    made = campaign(
        sources(factor), taps=TWELVE.taps(41, "cosine", 0.98), alphas=[-2.0, 4.0, 10.0], mach=0.2,
        pressures="relative to static", spacing=False,
    )  # fmt: skip
    problem = assemble(made).problem
    linear = propagate(problem, LEVEL)
    y = np.concatenate([sample(problem, slice(0, 3), 1, tile) for tile in range(tiles)], axis=1)[..., COLUMNS]
    low, high, wide = (getattr(linear, name)[:, COLUMNS] for name in ("low", "high", "U"))
    inside = np.mean((y >= low[:, None]) & (y <= high[:, None]), axis=1)
    ends = np.quantile(y, [0.5 * (1.0 - LEVEL), 0.5 * (1.0 + LEVEL)], axis=1)
    off = np.max(np.abs(ends - np.stack([low, high])) / wide, axis=0)
    furthest = np.argmax(np.abs(inside - LEVEL), axis=0)
    return inside[furthest, np.arange(3)], off.max(axis=0)


def conclude(found: Found) -> None:
    """What the answer says; four standard errors of the shares, and of the ends, are allowed beside it."""
    share_room = 4.0 * np.sqrt(0.05 * 0.95 / found.trials)
    # An end at z = 1.96 is known to √(p(1 − p)/n)/φ(z) = 2.67/√n of u, that is 1.36/√n of U.
    end_room = 4.0 * 1.36 / np.sqrt(found.trials)
    at = {factor: i for i, factor in enumerate(found.factors)}
    assert np.all(np.abs(found.held[at[1.0]] - LEVEL) < 0.010 + share_room), found.held
    assert np.all(found.off[at[1.0]] < 0.04 + end_room), found.off
    assert found.held[at[0.25], 1] > 0.985
    assert np.all(found.off[at[32.0]] > found.off[at[1.0]])
    assert np.all(found.off[at[32.0], 1:] > 0.15)
    assert np.all(found.held[at[32.0]] > 0.90)
    if 8.0 in at:
        assert np.all(found.off[at[8.0]] < 0.06 + end_room)


def draw(found: Found, path: Path) -> None:
    """Share held and error of an end against the factor."""
    with drawn(path, 2) as (left, right):
        for i, name in enumerate(NAMES):
            left.semilogx(found.factors, 100.0 * found.held[:, i], label=name, **look(i))
            right.loglog(found.factors, 100.0 * found.off[:, i], label=name, **look(i))
        left.axhline(100.0 * LEVEL, color="0.5", lw=0.8)
        left.set(ylabel="held by the linearised 95 % interval, %")
        right.set(ylabel="largest error of an end, % of U")
        for ax in (left, right):
            ax.set(
                xlabel="all sizes times", xticks=found.factors, xticklabels=[f"{f:g}" for f in found.factors]
            )
            ax.minorticks_off()
        left.legend()


def main() -> None:
    """Full size."""
    found = find()
    for factor, held, off in zip(found.factors, found.held, found.off, strict=True):
        rows = [
            f"{n} {100 * h:.2f} % held, ends off {100 * o:.1f} % of U"
            for n, h, o in zip(NAMES, held, off, strict=True)
        ]
        print(f"times {factor:g}: " + "; ".join(rows))
    conclude(found)
    draw(found, Path(__file__).with_suffix(".svg"))


if __name__ == "__main__":
    main()
