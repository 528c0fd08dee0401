"""Sobol' indices of groups of sources: what part of the variance each group makes, alone and in all.

The groups move together; each source keeps its distribution and its latents, so what taps share stays shared,
and a source's common scale belongs to it. Estimated by Jansen's sums with the linear model as control variate
(:mod:`tapband.probability.jansen`): as good as exact where the equation is nearly linear.

>>> from tapband.probability.functional import Quantity, problem_of
>>> product = problem_of(lambda a, b: a * b, [Quantity("a", 2.0, 0.1), Quantity("b", 1.0, 0.1)])
>>> sobol(product, ["a", "b"], seed=1).total[0, 0].round(2)
array([0.2, 0.8])
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from os import cpu_count

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Problem
from tapband.probability.jansen import Design, Sums, sums_of

Array = NDArray[np.float64]

LADDER = ((32, 0.003), (64, 0.02), (256, 0.02), (1024, np.inf))
"""Base samples, and the half-width of an index's interval above which a point climbs to the next rung."""
TILE = 64
"""Most base samples evaluated at once; half of them mirror the others."""
TOGETHER = 4
"""Points evaluated together."""
TABLES = ("first", "first_ci", "total", "total_ci")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Indices:
    """Sobol' indices (P, m, G) with half-widths of their 95 % intervals.

    NaN where the output has no value, no variance (a constant; Student's t with ν ≤ 2) or a refused trial.
    """

    groups: tuple[str, ...]
    first: Array
    first_ci: Array
    total: Array
    total_ci: Array
    variance: Array
    """(P, m)."""
    failed: NDArray[np.int64]
    """(P, m) evaluations without a valid state; one is enough to refuse the indices of its output."""
    samples: NDArray[np.int64]
    """(P,) base samples."""
    method: str


def group_order(groups: Sequence[str]) -> tuple[tuple[str, ...], NDArray[np.int64]]:
    """Distinct groups in order of appearance, and the group (S,) of each source."""
    names = tuple(dict.fromkeys(groups))
    return names, np.array([names.index(group) for group in groups], dtype=np.int64)


def sobol(
    problem: Problem, groups: Sequence[str], seed: int, samples: int | None = None, threads: int | None = None
) -> Indices:
    """Indices of every output at every point; ``groups`` names the group of each family.

    ``samples`` base samples (even, whole tiles); None: as many as each point needs, by ``LADDER``. Draws are
    keyed by source, so neither the order of points, nor threads, nor other sources' draws change a row.
    """
    names, owner = group_order(groups)
    shape = (*problem.estimate.shape, len(names))
    first, first_ci, total, total_ci = (np.full(shape, np.nan) for _ in TABLES)
    tables = dict(zip(TABLES, (first, first_ci, total, total_ci), strict=True))
    spread, failed = np.full(shape[:2], np.nan), np.zeros(shape[:2], dtype=np.int64)
    used = np.zeros(shape[0], dtype=np.int64)
    design = Design.of(problem, owner, len(names), seed)

    def work(start: int) -> None:
        for rows, size, sums in _climb(design, range(start, min(start + TOGETHER, shape[0])), samples):
            where = slice(rows.start, rows.stop)
            for name, values in sums.indices.items():
                tables[name][where] = values
            spread[where], failed[where], used[where] = sums.spread, sums.failed, size

    if names:
        with ThreadPoolExecutor(threads or cpu_count() or 1) as pool:
            list(pool.map(work, range(0, shape[0], TOGETHER)))
    return Indices(
        groups=names, first=first, first_ci=first_ci, total=total, total_ci=total_ci, variance=spread,
        failed=failed, samples=used, method="control variate",
    )  # fmt: skip


def _climb(design: Design, points: range, samples: int | None) -> Iterator[tuple[range, int, Sums]]:
    """Blocks of points, base samples and sums; a point with wide intervals comes again with more samples."""
    ladder = LADDER if samples is None else ((samples, np.inf),)
    work = [(points, 0)]
    while work:
        rows, step = work.pop()
        size, wide = ladder[step]
        sums = sums_of(design, rows, min(size, TILE) // 2, max(1, size // TILE))
        yield rows, size, sums
        if step + 1 < len(ladder):
            ends = np.maximum(sums.indices["first_ci"], sums.indices["total_ci"])
            more = np.nan_to_num(ends).max(axis=(1, 2)) > wide
            work += [(range(p, p + 1), step + 1) for p, again in zip(rows, more, strict=True) if again]
