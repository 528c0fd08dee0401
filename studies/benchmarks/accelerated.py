"""How much less work do accelerated trials need than plain ones, to the tolerance of JCGM 101?

One point, 60 taps, about 130 latents, one thread, all five coefficients: once with a budget that normal errors
dominate, once with rectangular and shared errors that visibly bend the coefficients. Plain trials run in chunks
with reused buffers until their tolerance is met (JCGM 101:2008, 7.9.4). Both ways must agree to the tolerance.

How many plain trials two digits need depends on the first digit of u, from some ten thousand (1) to a million (9).
The sizes are set so that it is 9 for one coefficient; ``typical`` is the mean over six settings.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from budgets import curved, normal, polar, times
from timing import Versus, interleaved

from tapband.nouns.source import Source
from tapband.probability.coverage import tolerance
from tapband.probability.montecarlo import MonteCarlo, run
from tapband.reduction import assemble

BUDGETS = {"normal": times(normal(), 0.6), "curved": times(curved(), 0.42)}
"""Sizes for which one u begins with 9."""
LARGEST = {"normal": 1.0 / 200.0, "curved": 1.0 / 20.0}


@dataclass(frozen=True, slots=True, kw_only=True)
class Compared:
    """Times, the largest number of trials of either way, and how the accelerated point was done."""

    times: Versus
    trials: int
    plain_trials: int
    method: str


def compare(sources: Sequence[Source], rounds: int = 3) -> Compared:
    """One budget by both ways."""
    problem = assemble(polar(1, sources=sources)).problem
    kept: dict[str, MonteCarlo] = {}

    def work(trials: str) -> None:
        kept[trials] = run(problem, 0.95, trials, threads=1)

    times = interleaved(lambda: work("auto"), lambda: work("plain"), rounds)
    quick, slow = kept["auto"], kept["plain"]
    assert quick.reached.all()
    assert slow.reached.all()
    for name in ("mean", "u", "low", "high"):
        off = np.abs(getattr(quick, name) - getattr(slow, name))
        # Each is within half of δ of the truth at two of its numerical standard deviations.
        assert np.all(off < 1.5 * tolerance(slow.u)), name
    return Compared(
        times=times,
        trials=int(quick.trials.max()),
        plain_trials=int(slow.trials.max()),
        method=quick.method[0],
    )


def typical(sources: Sequence[Source], settings: int = 6) -> float:
    """Time over that of plain trials, both summed over sizes from 1 to 2.2 times."""
    found = [
        compare(times(sources, 10.0 ** (0.33 * i / (settings - 1))), rounds=1).times for i in range(settings)
    ]
    return sum(one.ours for one in found) / sum(one.theirs for one in found)


def main() -> None:
    """Full size."""
    for name, sources in BUDGETS.items():
        one = compare(sources)
        print(
            f"{name}: {one.trials} trials ({one.method}) {1e3 * one.times.ours:.1f} ms, {one.plain_trials} plain "
            f"{one.times.theirs:.2f} s: 1/{1.0 / one.times.ratio:.0f}"
        )
        print(f"  on average over first digits: 1/{1.0 / typical(sources):.0f}")


if __name__ == "__main__":
    main()
