"""How long do thousands of points take, in how much memory, and how does the time grow?

Computation: linearised and accelerated Monte Carlo to the tolerance, 60 taps, about 130 latents. Whole command:
reading the files, budget, rankings, fits, report and tables too, against importing numpy, scipy, pandas and
matplotlib alone. Growth exponents in points, taps, sources and plain trials.
"""

from __future__ import annotations

import sys
import tempfile
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path

from budgets import normal, polar, times
from timing import Ran, exponent, program, python, seconds
from written import write

from tapband.nouns.source import INDEPENDENT, Source
from tapband.probability.montecarlo import run
from tapband.reduction import assemble, reduce_campaign

IMPORTS = {
    "bare": "import numpy, scipy, pandas, matplotlib",
    "as used": "import numpy, scipy.stats, scipy.interpolate, pandas, matplotlib.pyplot",
}
"""The four packages, and the parts of them that a script which reduces by hand would load."""
GROWTH = 1.1


@dataclass(frozen=True, slots=True, kw_only=True)
class Command:
    """A whole command beside the imports."""

    command: Ran
    imports: dict[str, Ran]

    def ratio(self, imports: str) -> float:
        """Of processor time."""
        return self.command.processor / self.imports[imports].processor


def command(points: int, taps: int = 60) -> Command:
    """``tapband reduce`` of so many points."""
    with tempfile.TemporaryDirectory() as folder:
        campaign = write(Path(folder) / "campaign", points, taps)
        imports = {name: program([sys.executable, "-c", code]) for name, code in IMPORTS.items()}
        ran = program(
            [sys.executable, "-m", "tapband", "reduce", str(campaign), "--quiet"], one_thread=False, ok=(0, 1)
        )
    return Command(command=ran, imports=imports)


def computation(points: int) -> Ran:
    """Both propagators of so many points, in a program of its own."""
    return python(
        "from budgets import polar\n"
        "from tapband.reduction import reduce_campaign\n"
        f"reduced = reduce_campaign(polar({points}))\n"
        "assert reduced.montecarlo.reached.all()\n",
        one_thread=False,
    )


def growth(factor: int = 8, rounds: int = 3, points: int = 64) -> dict[str, float]:
    """Growth exponents over ``factor`` times as many points, taps, sources and plain trials.

    With taps and sources the number of trials is held: how many are needed depends on what the errors are.
    """
    one = assemble(polar(1)).problem

    def trials(n: int) -> Callable[[], object]:
        return lambda: run(one, 0.95, f"plain:{10_000 * n}", threads=1)

    works: dict[str, Callable[[int], Callable[[], object]]] = {
        "points": lambda n: lambda: reduce_campaign(polar(points * n), threads=1),
        "taps": lambda n: lambda: reduce_campaign(polar(points, 30 * n), "256", threads=1),
        "sources": lambda n: lambda: reduce_campaign(polar(points, sources=many(4 * n)), "256", threads=1),
        "trials": trials,
    }
    found = {}
    for name, work in works.items():
        sizes = (1, factor if name != "taps" else max(factor // 2, 2))
        jobs = [work(n) for n in sizes]
        times = [
            min(column)
            for column in zip(*[[seconds(job) for job in jobs] for _ in range(rounds)], strict=True)
        ]
        found[name] = exponent(sizes, times)
    return found


def many(count: int) -> tuple[Source, ...]:
    """``count`` sources, independent across taps, that make the same budget whatever their number."""
    kinds = [source for source in normal() if source.across_taps == INDEPENDENT]
    parts = times([kinds[i % len(kinds)] for i in range(count)], (2.0 / count) ** 0.5)
    return tuple(replace(one, name=f"source {i}", group=f"source {i}") for i, one in enumerate(parts))


def main() -> None:
    """Full size."""
    for points in (200, 10_000):
        one = command(points)
        ratios = " and ".join(f"{one.ratio(name):.1f} times the imports {name}" for name in IMPORTS)
        print(
            f"{points} points, whole command: {one.command.wall:.1f} s, {one.command.processor:.1f} s of processor, "
            f"{ratios}, peak {one.command.peak:.0f} MB"
        )
    ran = computation(10_000)
    print(
        f"10,000 points, computation: {ran.wall:.1f} s on the wall, {ran.processor:.1f} s of processor, "
        f"peak {ran.peak:.0f} MB"
    )
    for name, power in growth().items():
        print(f"growth with {name}: {power:.2f}")
        assert power < GROWTH, (name, power)


if __name__ == "__main__":
    main()
