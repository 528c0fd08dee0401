"""Joint Monte Carlo trials of many points: what points share is drawn once and seen by all of them."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Draws, Family
from tapband.probability.draws import block
from tapband.questions.combine import Combination
from tapband.questions.latents import Latents

Array = NDArray[np.float64]
Codes = NDArray[np.int64]
TOGETHER = 8_192
"""Trials times points evaluated at once, so that memory stays bounded."""


class Evaluated(Protocol):
    """As much of a :class:`tapband.nouns.problem.Problem` as trials need."""

    @property
    def families(self) -> Sequence[Family]: ...

    def evaluate(self, points: slice, draws: Draws) -> Array:
        """y (Pb, T, m) of a block of points."""
        ...


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Joint:
    """N joint trials of points (k,): coefficients, and what the linear model says of them, (k, N, m).

    With them the errors (k, N) of alpha [rad] and of the moment centre. A refused trial is NaN.
    """

    points: Codes
    y: Array
    linear: Array
    alpha: Array
    centre: Array

    def places(self, points: Codes) -> Codes:
        """Where some points stand."""
        return np.searchsorted(self.points, points)


def joint_trials(
    problem: Evaluated, latents: Latents, points: Codes, seed: int, tile: int, size: int
) -> Joint:
    """Trials of tile ``tile`` for some points, in increasing order; keyed, so the same in any company."""
    wanted = np.unique(points)
    m = len(latents.outputs)
    y, linear = np.empty((wanted.size, size, m)), np.empty((wanted.size, size, m))
    alpha, centre = np.zeros((2, wanted.size, size))
    families = problem.families
    for chunk in _chunks(wanted, max(TOGETHER // size, 1)):
        where = range(int(wanted[chunk.start]), int(wanted[chunk.stop - 1]) + 1)
        inside = wanted[chunk] - where.start
        drawn = block(families, range(len(families)), where, seed, tile, size)
        values = problem.evaluate(slice(where.start, where.stop), drawn)
        y[chunk] = np.broadcast_to(values, (len(where), size, m))[inside]
        model = np.repeat(latents.estimate[wanted[chunk], None, :], size, axis=1)
        for s, xi in drawn.items():
            mine = xi if xi.shape[0] == 1 else xi[inside]
            model += mine @ np.swapaxes(latents.sensitivity[s][wanted[chunk]], 1, 2)
            for into, of in ((alpha, latents.on_alpha), (centre, latents.on_centre)):
                if s in of:
                    into[chunk] += (mine @ of[s][wanted[chunk], :, None])[:, :, 0]
        linear[chunk] = model
    return Joint(points=wanted, y=y, linear=linear, alpha=alpha, centre=centre)


def _chunks(wanted: Codes, size: int) -> Iterator[slice]:
    """Consecutive pieces of the wanted points that span at most ``size`` points."""
    start = 0
    while start < wanted.size:
        stop = int(np.searchsorted(wanted, wanted[start] + size))
        yield slice(start, stop)
        start = stop


def applied(combination: Combination, joint: Joint, away: Array) -> Array:
    """What coefficients ``away`` (k, N, m) from their estimates add to the quantities, (R, q, N)."""
    place = joint.places(combination.point)
    terms = combination.weight @ np.swapaxes(away[place], 1, 2)
    terms = terms + combination.on_alpha[:, :, None] * joint.alpha[place][:, None, :]
    if combination.on_centre is not None:
        terms = terms + combination.on_centre[:, :, None] * joint.centre[place][:, None, :]
    total = np.zeros((combination.rows, *terms.shape[1:]))
    np.add.at(total, combination.row, terms)
    return total
