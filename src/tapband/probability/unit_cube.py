"""The latents of one point as coordinates of a unit cube, for samplers that know nothing but uniform numbers.

One coordinate a latent, and one more for the common scale of a family whose size is in doubt. Equal
coordinates give equal latents, so what taps share stays shared. D coordinates, T trials.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import sqrt

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaincinv, ndtri

from tapband.nouns.problem import Family, Problem
from tapband.nouns.source import Shape
from tapband.probability.distributions import doubt, half_width

Array = NDArray[np.float64]
CHUNK = 2_000
"""Trials evaluated at once."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Cube:
    """Coordinates of the latents that act at one point."""

    problem: Problem
    point: int
    owner: NDArray[np.int64]
    """(D,) family of each coordinate: its members, then its scale where that is in doubt."""

    @classmethod
    def of(cls, problem: Problem, point: int) -> Cube:
        """The cube of a point."""
        sizes = [len(family.members) + _doubted(family, point) for family in problem.families]
        return cls(problem=problem, point=point, owner=np.repeat(np.arange(len(sizes)), sizes))

    def outputs(self, u: Array) -> Array:
        """y (T, m) at coordinates ``u`` (T, D), all inside (0, 1); NaN where a trial has no valid state."""
        where = slice(self.point, self.point + 1)
        return np.concatenate(
            [
                self.problem.evaluate(where, self._latents(u[start : start + CHUNK]))[0]
                for start in range(0, len(u), CHUNK)
            ]
        )

    def _latents(self, u: Array) -> dict[int, Array]:
        draws = {}
        for f, family in enumerate(self.problem.families):
            mine = u[:, self.owner == f]
            size = len(family.members)
            values = quantile(family.shape, family.top, mine[:, :size])
            if _doubted(family, self.point):
                values = values * _scale(family, self.point, mine[:, size:])
            draws[f] = values[None]
        return draws


def spread_over(cube: Cube, groups: Sequence[str]) -> list[str]:
    """Group of each coordinate (D,) from the group of each family."""
    return [groups[f] for f in cube.owner.tolist()]


def quantile(shape: Shape, top: float, u: Array) -> Array:
    """Quantiles of a standardised shape. *Source* JCGM 101:2008, 6.4.2-6.4.7."""
    if shape is Shape.NORMAL:
        return np.asarray(ndtri(u))
    centred = 2.0 * u - 1.0
    if shape is Shape.ARCSINE:
        return np.asarray(sqrt(2.0) * np.sin(0.5 * np.pi * centred))
    beta = {Shape.RECTANGULAR: 1.0, Shape.TRIANGULAR: 0.0}.get(shape, top)
    inside = np.abs(centred)
    flat = 0.5 * (1.0 + beta) * inside
    slope = 1.0 - np.sqrt((1.0 - inside) * (1.0 - beta * beta))
    below = inside <= 2.0 * beta / (1.0 + beta)
    return np.asarray(half_width(shape, top) * np.copysign(np.where(below, flat, slope), centred))


def _doubted(family: Family, point: int) -> int:
    """1 where the size itself is drawn, else 0."""
    if family.shape is Shape.NORMAL:
        return int(np.isfinite(family.dof[point]))
    return int(doubt(family, point) > 0.0)


def _scale(family: Family, point: int, u: Array) -> Array:
    """Common factor of a family's latents: √(ν/χ²), or 1 + √3 r V (JCGM 101:2008, 6.4.9 and 6.4.3)."""
    if family.shape is Shape.NORMAL:
        nu = float(family.dof[point])
        return np.asarray(np.sqrt(0.5 * nu / gammaincinv(0.5 * nu, u)))
    return 1.0 + sqrt(3.0) * doubt(family, point) * (2.0 * u - 1.0)
