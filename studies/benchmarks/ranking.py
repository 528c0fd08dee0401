"""What does ranking cost beside the linearised reduction, and Sobol' indices beside SALib's?

200 points, 60 taps: groups by linear shares and every tap (its share, its loss) against the linearised reduction.
Then Sobol' indices of one point by Jansen's sums with the linear model as control variate against SALib's own
sampling and analysis of 4,096 base samples, on the same problem and groups.

*Answer* the ranking costs about what the linearised reduction does; the indices a thousandth of SALib's, with
intervals a tenth as wide.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from budgets import curved, polar
from timing import Versus, interleaved

from tapband.probability.by_salib import sobol_by_salib
from tapband.probability.linearised import propagate
from tapband.probability.sensitivity import sobol
from tapband.questions.rank import rank_groups
from tapband.questions.rank_taps import rank_taps
from tapband.reduction import assemble

LARGEST = 2.0
"""Of the linearised reduction."""
SALIB = 1.0 / 100.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Indices:
    """Times against SALib's, and the largest half-width of a 95 % interval of an index by either."""

    times: Versus
    ours: float
    theirs: float


def linear(points: int = 200, rounds: int = 5) -> Versus:
    """Ranking against reduction, both with the geometry."""
    made = polar(points)
    a = assemble(made)
    found = propagate(a.problem, 0.95)
    groups = [one.group for one in a.loaded]

    def rank() -> None:
        rank_groups(a.problem, found, groups, 0.95)
        rank_taps(a)

    return interleaved(rank, lambda: propagate(assemble(made).problem, 0.95), rounds)


def indices(samples: int = 4_096, rounds: int = 2) -> Indices:
    """One point, all coefficients, each source a group."""
    problem = assemble(polar(1, sources=curved())).problem
    groups = [family.source for family in problem.families]
    ours, theirs = sobol(problem, groups, 1, threads=1), sobol_by_salib(problem, 0, groups, samples, 1)
    # Both intervals are of 95 %; over fifty indices the largest difference may be a good half wider.
    room = 1.8 * (ours.total_ci + theirs.total_ci) + 1e-3
    assert np.all(np.abs(ours.total - theirs.total) <= room)
    times = interleaved(
        lambda: sobol(problem, groups, 1, threads=1),
        lambda: sobol_by_salib(problem, 0, groups, samples, 1),
        rounds,
    )
    return Indices(times=times, ours=float(ours.total_ci.max()), theirs=float(theirs.total_ci.max()))


def main() -> None:
    """Full size."""
    one = linear()
    print(
        f"ranking 200 points: {1e3 * one.ours:.0f} ms, linearised {1e3 * one.theirs:.0f} ms, ratio {one.ratio:.2f}"
    )
    many = indices()
    print(
        f"Sobol' indices: {1e3 * many.times.ours:.0f} ms to ±{many.ours:.4f}, SALib {many.times.theirs:.1f} s "
        f"to ±{many.theirs:.3f}, 1/{1.0 / many.times.ratio:.0f}"
    )
    assert one.ratio < LARGEST, one
    assert many.times.ratio < SALIB, many
    assert many.ours < many.theirs


if __name__ == "__main__":
    main()
