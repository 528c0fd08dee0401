"""Propagation of distributions (JCGM 101): which engine does what ``trials`` asks for.

``"auto"``: accelerated, adaptive. A number: accelerated, that many trials. ``"plain:N"``: N plain trials.
``"plain"``: plain trials until the tolerance of JCGM 101:2008, 7.9.4 is met.
"""

from __future__ import annotations

from os import cpu_count
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Problem
from tapband.probability import accelerated, plain
from tapband.probability.draws import TILE
from tapband.probability.model import Model
from tapband.probability.outcome import NAMES, MonteCarlo, Numbers, Outcome, collected

Array = NDArray[np.float64]

__all__ = ["TILE", "MonteCarlo", "parse_trials", "run", "sample"]


def parse_trials(trials: str) -> tuple[Literal["accelerated", "plain"], int | None]:
    """Engine and fixed number of trials (None: adaptive) of a statement; ValueError says what is wrong."""
    engine: Literal["accelerated", "plain"] = "plain" if trials.startswith("plain") else "accelerated"
    number = trials.removeprefix("plain").removeprefix(":") if engine == "plain" else trials
    if number in ("", "auto"):
        return engine, None
    if not number.isdecimal() or int(number) < 2:
        raise ValueError(f'trials: needs "auto", a whole number from 2, or "plain:N"; got "{trials}"')
    return engine, int(number)


def run(
    problem: Problem,
    level: float,
    trials: str = "auto",
    seed: int = 1,
    threads: int | None = None,
    progress: plain.Progress | None = None,
) -> MonteCarlo:
    """Mean, standard uncertainty and coverage intervals of every output at every point.

    ``threads`` (default: as many as processors) changes no number. ``progress(done, total)`` is called from
    the calling thread. An output without an estimate has NaN throughout, no trials, and counts as reached.
    """
    engine, fixed = parse_trials(trials)
    model = Model.of(problem)
    workers = threads or cpu_count() or 1
    points = range(len(problem.estimate))
    if not model.families:
        return collected([_exact(model, point) for point in points], len(problem.outputs))
    plan = plain.Plan(level=level, seed=seed, fixed=fixed, threads=workers)
    if engine == "plain":
        found = plain.run_points(model, points, plan, progress)
    else:
        found = accelerated.run(model, plan, progress)
    return collected([found[point] for point in points], len(problem.outputs))


def _exact(model: Model, point: int) -> Outcome:
    """What there is to say where nothing errs."""
    y = model.estimate[point]
    zero = np.where(np.isnan(y), np.nan, 0.0)
    values = {name: zero if name == "u" or name.endswith("_sd") else y for name in NAMES}
    none = np.zeros(y.shape, dtype=np.int64)
    known = np.ones(y.shape, dtype=np.bool_)
    return Outcome(numbers=Numbers(**values), trials=none, refused=0, reached=known, method="exact")


def sample(problem: Problem, points: slice, seed: int, tile: int) -> Array:
    """y (Pb, TILE, m): joint draws of one tile; what points share is shared. NaN where a trial is refused."""
    return plain.sample_tile(problem, range(*points.indices(len(problem.estimate))), seed, tile)
