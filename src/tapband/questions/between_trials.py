"""Monte Carlo of what lies between points: fits and differences at joint trials of all their points."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from tapband.probability.draws import fresh, keyed
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
ENDS = ("low", "high", "low_sd", "high_sd")


def of_differences(
    problem: Evaluated, latents: Latents, found: Differences, level: float, seed: int
) -> Drawn:
    """Monte Carlo intervals (R, m) of differences."""
    half = np.sqrt(3.0 * found.added)

    def true(joint: Joint, rows: Codes) -> Array:
        away = joint.y - latents.estimate[joint.points][:, None, :]
        return applied(found.combination.only(rows), joint, away)

    return _drawn(
        problem, latents, found.combination, found.value, found.u, half, true, level, seed, DIFFERENCES
    )


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
) -> Drawn:
    points = np.unique(combination.point)
    size = int(np.clip(budget // points.size, FEWEST, MOST))
    reach = reaches(problem.families, latents, combination, u, half, level)
    joint = joint_trials(problem, latents, points, seed, 0, size)
    extra = _rectangular(seed, 0, half, size)
    away = joint.linear - latents.estimate[joint.points][:, None, :]
    linear = np.nan_to_num(applied(combination, joint, np.nan_to_num(away))) + extra
    first = corrected(value, u, reach, linear, true(joint, np.arange(len(value))) + extra)
    rough = ~first.nearly & np.isfinite(value) & (u > 0.0)
    if not rough.any():
        return first
    ends = {name: np.where(rough, np.nan, getattr(first, name)) for name in ENDS}
    rows = _affordable(np.flatnonzero(rough.any(axis=1)), combination, MORE * budget // ENOUGH)
    if rows.size:
        more = _more_trials(
            problem, latents, combination.only(rows), lambda j: true(j, rows), half[rows], seed, budget
        )
        second = counted(value[rows], more, level)
        for name in ENDS:
            ends[name][rows] = np.where(rough[rows], getattr(second, name), ends[name][rows])
    return replace(first, **ends)


def _affordable(rows: Codes, combination: Combination, points: int) -> Codes:
    """The first of some rows that draw on so many points together; the first one whatever it costs."""
    cost = np.cumsum(np.bincount(combination.row, minlength=combination.rows)[rows])
    return np.asarray(rows[(cost <= points) | (np.arange(rows.size) == 0)])


def _more_trials(
    problem: Evaluated,
    latents: Latents,
    combination: Combination,
    true: Callable[[Joint], Array],
    half: Array,
    seed: int,
    budget: int,
) -> Array:
    """Values less their estimates (R, q, N) of rows that the linear law does not serve, from fresh tiles."""
    points = np.unique(combination.point)
    count = max(ENOUGH, min(MORE * budget // points.size, MORE * MOST))
    size = min(count, MOST)
    parts = []
    for tile in range(1, 1 + -(-count // size)):
        joint = joint_trials(problem, latents, points, seed, tile, size)
        parts.append(true(joint) + _rectangular(seed, tile, half, size))
    return np.concatenate(parts, axis=2)


def _rectangular(seed: int, tile: int, half: Array, size: int) -> Array:
    """Draws (R, q, N) of the bounded terms that pairing or local fits add."""
    generator = keyed(fresh(), seed, "between points", tile)
    return np.asarray(half[..., None] * generator.uniform(-1.0, 1.0, (*half.shape, size)))
