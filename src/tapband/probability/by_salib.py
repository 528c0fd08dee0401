"""Sobol' indices and screening by SALib's own sampling and analysis, through the same latents.

The independent check of :mod:`tapband.probability.sensitivity`, and the slower one. SALib turns one NaN into
indices that look like numbers, so it is never shown one: an output with a refused trial has no indices.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.errors import QuestionError, RangeError
from tapband.nouns.problem import Problem
from tapband.probability.jansen import ROUNDING
from tapband.probability.sensitivity import Indices, group_order
from tapband.probability.unit_cube import Cube, spread_over

Array = NDArray[np.float64]

INSIDE = 2.0**-31
"""Half a step of the sampler's sequences: keeps normal quantiles finite."""
LEVELS = 4
TAIL = 0.05
"""Screening moves each latent between this quantile and its mirror image."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Screening:
    """Morris's μ* (m, S) with half-widths of 95 % intervals, in units of the outputs; NaN as for indices."""

    mu_star: Array
    mu_star_ci: Array
    failed: NDArray[np.int64]
    """(m,) evaluations without a valid state."""


def sobol_by_salib(problem: Problem, point: int, groups: Sequence[str], samples: int, seed: int) -> Indices:
    """Indices (1, m, G) at one point from ``samples`` base samples, a power of two.

    *Source* Saltelli's design on Sobol' sequences and its bootstrap intervals, as SALib makes them.
    """
    if samples < 2 or samples & (samples - 1):
        raise QuestionError(f"salib: needs a power of two from 2; got {samples}; write salib:1024")
    from SALib.analyze import sobol as analysis
    from SALib.sample import sobol as sampling

    names, _ = group_order(groups)
    cube = Cube.of(problem, point)
    stated = _stated(spread_over(cube, groups), INSIDE)
    rows = sampling.sample(stated, samples, calc_second_order=False, seed=seed)
    y = cube.outputs(rows)
    m = y.shape[1]
    tables = {key: np.full((1, m, len(names)), np.nan) for key in ("S1", "S1_conf", "ST", "ST_conf")}
    failed, usable = _usable(y, problem.estimate[point])
    for j in np.flatnonzero(usable):
        found = analysis.analyze(stated, _refused_no_nan(y[:, j]), calc_second_order=False, seed=seed + 1)
        for key, table in tables.items():
            table[0, j] = found[key]
    variance = np.where(usable, y.var(axis=0), np.nan)
    return Indices(
        groups=names, first=tables["S1"], first_ci=tables["S1_conf"], total=tables["ST"],
        total_ci=tables["ST_conf"], variance=variance[None], failed=failed[None],
        samples=np.array([samples]), method="SALib",
    )  # fmt: skip


def screen(problem: Problem, point: int, trajectories: int, seed: int) -> Screening:
    """Morris's screening of every source at one point; the latents of a source move together.

    *Source* Campolongo, Cariboni, Saltelli, Environmental Modelling & Software 22 (2007) 1509, by SALib.
    """
    from SALib.analyze import morris as analysis
    from SALib.sample import morris as sampling

    cube = Cube.of(problem, point)
    count = len(problem.families)
    stated = _stated(spread_over(cube, [str(s) for s in range(count)]), TAIL)
    rows = sampling.sample(stated, trajectories, num_levels=LEVELS, seed=seed)
    y = cube.outputs(rows)
    failed, usable = _usable(y, problem.estimate[point])
    mu, ci = np.full((y.shape[1], count), np.nan), np.full((y.shape[1], count), np.nan)
    for j in np.flatnonzero(usable):
        found = analysis.analyze(stated, rows, _refused_no_nan(y[:, j]), num_levels=LEVELS, seed=seed + 1)
        order = [int(name) for name in found["names"]]
        mu[j, order], ci[j, order] = found["mu_star"], found["mu_star_conf"]
    return Screening(mu_star=mu, mu_star_ci=ci, failed=failed)


def _stated(groups: Sequence[str], inside: float) -> dict[str, Any]:
    """The problem as SALib wants it: uniform coordinates, each in a group."""
    return {
        "num_vars": len(groups),
        "names": [f"u{i}" for i in range(len(groups))],
        "groups": list(groups),
        "bounds": [[inside, 1.0 - inside]] * len(groups),
    }


def _usable(y: Array, estimate: Array) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    """(m,) refused trials, and which outputs have a value, moved, and were never refused."""
    known = np.isfinite(estimate)
    failed = np.where(known, np.isnan(y).sum(axis=0), 0)
    moved = np.ptp(np.nan_to_num(y), axis=0) > ROUNDING * (1.0 + np.abs(np.nan_to_num(estimate)))
    return failed, known & moved & (failed == 0)


def _refused_no_nan(y: Array) -> Array:
    """The values as they are; SALib would answer NaN with numbers that look right."""
    if np.isnan(y).any():
        raise RangeError(f"Sobol' indices: every trial needs a valid state; got {np.isnan(y).sum()} without")
    return y
