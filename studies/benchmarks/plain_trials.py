"""What do plain Monte Carlo trials of one point cost beside drawing their normals, and in how much memory?

One point, 60 taps, about 130 latents, one thread: a million trials in ten turns against NumPy filling one reused
buffer with as many standard normals. Peak memory of 10⁶ and of 10⁷ trials, each in a program of its own.

*Answer* about twice the time of the normals alone; under 150 MB whatever the number of trials.
"""

from __future__ import annotations

import numpy as np
from budgets import polar
from timing import Versus, interleaved, python

from tapband.probability.montecarlo import run
from tapband.reduction import assemble

LARGEST = 2.5
MEMORY = 300.0
"""[MB]"""
CHUNK = 1_000


def draw(trials: int, latents: int) -> None:
    """The normals alone, by NumPy's default generator."""
    generator = np.random.default_rng(1)
    buffer = np.empty((CHUNK, latents))
    for _ in range(trials // CHUNK):
        generator.standard_normal(out=buffer)


def compare(trials: int = 100_000, rounds: int = 10) -> Versus:
    """Plain trials with all their results against the drawing."""
    problem = assemble(polar(1)).problem
    latents = sum(len(family.members) for family in problem.families)
    return interleaved(
        lambda: run(problem, 0.95, f"plain:{trials}", threads=1), lambda: draw(trials, latents), rounds
    )


def peak(trials: int) -> float:
    """Peak memory [MB] of one point's trials, imports and all."""
    code = (
        "from budgets import polar\n"
        "from tapband.probability.montecarlo import run\n"
        "from tapband.reduction import assemble\n"
        f"run(assemble(polar(1)).problem, 0.95, 'plain:{trials}', threads=1)\n"
    )
    return python(code).peak


def main() -> None:
    """Full size."""
    one = compare()
    print(f"100,000 trials: {one.ours:.2f} s, normals alone {one.theirs:.2f} s, ratio {one.ratio:.2f}")
    assert one.ratio < LARGEST, one
    for trials in (1_000_000, 10_000_000):
        memory = peak(trials)
        print(f"{trials:.0e} trials: peak {memory:.0f} MB")
        assert memory < MEMORY


if __name__ == "__main__":
    main()
