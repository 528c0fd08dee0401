"""Monte Carlo of what lies between points: fits and differences at joint trials of all their points."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from tapband.probability.draws import fresh, keyed
from tapband.probability.montecarlo import parse_trials
from tapband.questions.combine import Combination
from tapband.questions.compare import Differences
from tapband.questions.fit import Fits
from tapband.questions.fit_plan import OUTPUTS
from tapband.questions.joint import Evaluated, Joint, applied, joint_trials
from tapband.questions.latents import Latents
from tapband.questions.law import Drawn, corrected, counted, reaches

Array = NDArray[np.float64]
Codes = NDArray[np.int64]
FITS, DIFFERENCES = 6_400, 25_600
"""Trials times points of the first look, from which a small correction to the linear law is had."""
FEWEST, MOST = 16, 1_024
MORE, ENOUGH = 4, 256
"""Times as many trials where the correction is not small, in tiles of their own, and the fewest of them.

Rows past that budget have no Monte Carlo interval, and their table says so; asked for alone, they get one."""
HELD = 20_000_000
"""Values of differences held at once: a fixed number of trials is at most what this allows."""
ENDS = ("low", "high", "low_sd", "high_sd")


def of_differences(
    problem: Evaluated, latents: Latents, found: Differences, level: float, seed: int, trials: str = "auto"
) -> Drawn:
    """Monte Carlo intervals (R, m) of differences; ``trials`` as of a campaign, N at most what memory holds."""
    half = np.sqrt(3.0 * found.added)

    def true(joint: Joint, rows: Codes) -> Array:
        away = joint.y - latents.estimate[joint.points][:, None, :]
        return applied(found.combination.only(rows), joint, away)

    return _drawn(
        problem, latents, found.combination, found.value, found.u, half, true, level, seed, DIFFERENCES,
        trials,
    )  # fmt: skip


def of_fits(problem: Evaluated, latents: Latents, found: Fits, level: float, seed: int) -> Drawn:
    """Monte Carlo intervals (R, 8) of fitted quantities; points and weights stay as planned."""
    columns = [latents.outputs.index(name) for name in OUTPUTS]

    def true(joint: Joint, rows: Codes) -> Array:
        moved = np.empty((rows.size, found.value.shape[1], joint.y.shape[1]))
        for i, r in enumerate(rows.tolist()):
            plan = found.plans[r]
            place = joint.places(plan.polar.points)
            alpha = latents.alpha[plan.polar.points] + joint.alpha[place].T
            y = np.swapaxes(joint.y[place][:, :, columns], 0, 1)
            with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
                moved[i] = plan.estimate(alpha, y, joint.centre[place].mean(axis=0)).T
        return moved - found.value[rows][:, :, None]

    return _drawn(
        problem, latents, found.combination, found.value, found.u, found.local, true, level, seed, FITS
    )


def _drawn(
    problem: Evaluated,
    latents: Latents,
    combination: Combination,
    value: Array,
    u: Array,
    half: Array,
    true: Callable[[Joint, Codes], Array],
    level: float,
    seed: int,
    budget: int,
    trials: str = "auto",
) -> Drawn:
    engine, fixed = parse_trials(trials)
    points = np.unique(combination.point)
    count = int(np.clip(budget // points.size, FEWEST, MOST))
    if fixed is not None:
        count = max(FEWEST, min(fixed, HELD // value.size))
    linear, moved = _trials(
        problem, latents, combination, lambda j: true(j, np.arange(len(value))), half, seed, count
    )
    if engine == "plain":
        return counted(value, moved, level)
    reach = reaches(problem.families, latents, combination, u, half, level)
    first = corrected(value, u, reach, linear, moved)
    rough = ~first.nearly & np.isfinite(value) & (u > 0.0)
    if not rough.any():
        return first
    ends = {name: np.where(rough, np.nan, getattr(first, name)) for name in ENDS}
    rows = _affordable(np.flatnonzero(rough.any(axis=1)), combination, MORE * budget // ENOUGH)
    if rows.size:
        some = combination.only(rows)
        count = int(np.clip(MORE * budget // np.unique(some.point).size, ENOUGH, MORE * MOST))
        _, more = _trials(problem, latents, some, lambda j: true(j, rows), half[rows], seed, count, first=1)
        second = counted(value[rows], more, level)
        for name in ENDS:
            ends[name][rows] = np.where(rough[rows], getattr(second, name), ends[name][rows])
    return replace(first, **ends)


def _affordable(rows: Codes, combination: Combination, points: int) -> Codes:
    """The first of some rows that draw on so many points together; the first one whatever it costs."""
    cost = np.cumsum(np.bincount(combination.row, minlength=combination.rows)[rows])
    return np.asarray(rows[(cost <= points) | (np.arange(rows.size) == 0)])


def _trials(
    problem: Evaluated,
    latents: Latents,
    combination: Combination,
    true: Callable[[Joint], Array],
    half: Array,
    seed: int,
    count: int,
    first: int = 0,
) -> tuple[Array, Array]:
    """What the linear model and the equation move each quantity by, (R, q, N) each, from tile ``first`` on."""
    points = np.unique(combination.point)
    size = min(count, MOST)
    linear, moved = [], []
    for tile in range(first, first + -(-count // size)):
        joint = joint_trials(problem, latents, points, seed, tile, size)
        away = np.nan_to_num(joint.linear - latents.estimate[joint.points][:, None, :])
        extra = _rectangular(seed, tile, half, size)
        linear.append(np.nan_to_num(applied(combination, joint, away)) + extra)
        moved.append(true(joint) + extra)
    return np.concatenate(linear, axis=2)[..., :count], np.concatenate(moved, axis=2)[..., :count]


def _rectangular(seed: int, tile: int, half: Array, size: int) -> Array:
    """Draws (R, q, N) of the bounded terms that pairing or local fits add."""
    generator = keyed(fresh(), seed, "between points", tile)
    return np.asarray(half[..., None] * generator.uniform(-1.0, 1.0, (*half.shape, size)))
