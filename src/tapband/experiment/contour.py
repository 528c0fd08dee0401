"""The true contour of the section: cubic splines through its points in arc length.

Internal order is lower trailing edge, nose, upper trailing edge; arc length s [chords] is zero at the nose
(the point of least x) and positive on the upper surface. Upper and lower follow from the direction of
travel (signed area), never from the sign of y.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

Array = NDArray[np.float64]

REACH = 0.002
"""Largest distance [chords] between a tap and the contour."""
_CORNER = np.cos(np.radians(50.0))
_EDGE = 0.03


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Contour:
    """A contour ready to place taps on and to integrate over.

    ``x_of`` and ``y_of`` are splines of arc length; ``base`` the corners (B, 2) of a blunt trailing edge from
    the upper end to the lower one, both ends included (two equal points where it is sharp).
    """

    x_of: CubicSpline
    y_of: CubicSpline
    knots: Array
    base: Array

    @property
    def s_lower(self) -> float:
        """Arc length of the lower trailing edge [chords], negative."""
        return float(self.knots[0])

    @property
    def s_upper(self) -> float:
        """Arc length of the upper trailing edge [chords]."""
        return float(self.knots[-1])

    @classmethod
    def of(cls, x: Array, y: Array) -> Contour:
        """The contour through points in table order, either direction, open, closed or blunt at the edge.

        *Assumes* at least four distinct points and a nose away from both ends.
        """
        points = np.column_stack([x, y]).astype(np.float64)
        points = points[np.append(True, np.any(np.diff(points, axis=0) != 0.0, axis=1))]
        if signed_area(points) > 0.0:
            points = points[::-1]
        first, last = _surface_ends(points)
        base = np.vstack([points[last:], points[: first + 1]])
        surface = points[first : last + 1]
        knots = _arc_length_knots(surface)
        knots = knots - _nose(CubicSpline(knots, surface[:, 0]))
        return cls(
            x_of=CubicSpline(knots, surface[:, 0]),
            y_of=CubicSpline(knots, surface[:, 1]),
            knots=knots,
            base=base,
        )

    def point(self, s: Array) -> tuple[Array, Array]:
        """Position (x, y) [chords] at arc length s, arrays of the shape of ``s``."""
        return self.x_of(s), self.y_of(s)

    def tangent(self, s: Array) -> tuple[Array, Array]:
        """Unit tangent in the direction of growing s, arrays of the shape of ``s``."""
        tx, ty = self.x_of(s, 1), self.y_of(s, 1)
        length = np.hypot(tx, ty)
        return tx / length, ty / length

    def place_x(self, x: Array, upper: NDArray[np.bool_]) -> Array:
        """Arc length of stations x [chords] on the upper or lower surface (n,); NaN beyond the surface.

        A station beyond an end by less than ``REACH`` is placed at that end.
        """
        far = np.where(upper, self.s_upper, self.s_lower)
        low, high = np.zeros_like(far), far.copy()
        for _ in range(64):
            middle = 0.5 * (low + high)
            before = self.x_of(middle) < x
            low, high = np.where(before, middle, low), np.where(before, high, middle)
        s = 0.5 * (low + high)
        s = np.where(np.abs(s - far) < 1e-12, far, s)
        return np.where(np.abs(self.x_of(s) - x) <= REACH, s, np.nan)

    def place_xy(self, x: Array, y: Array) -> tuple[Array, Array]:
        """Arc length of the nearest contour point and the distance to it [chords], each (n,)."""
        grid = np.unique(np.concatenate([np.linspace(a, b, 21) for a, b in _pairs(self.knots)]))
        gx, gy = self.point(grid)
        nearest = np.argmin((gx - x[:, None]) ** 2 + (gy - y[:, None]) ** 2, axis=1)
        low, high = grid[np.maximum(nearest - 1, 0)], grid[np.minimum(nearest + 1, grid.size - 1)]
        for _ in range(60):
            middle = 0.5 * (low + high)
            px, py = self.point(middle)
            ahead = (x - px) * self.x_of(middle, 1) + (y - py) * self.y_of(middle, 1) > 0.0
            low, high = np.where(ahead, middle, low), np.where(ahead, high, middle)
        s = 0.5 * (low + high)
        for end in (self.s_lower, self.s_upper):
            s = np.where(np.abs(s - end) < 1e-9, end, s)
        px, py = self.point(s)
        return s, np.hypot(x - px, y - py)


def signed_area(points: Array) -> float:
    """Signed area of the closed polygon through points (N, 2), positive counter-clockwise."""
    x, y = points.T
    return float(0.5 * np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y))


def _pairs(values: Array) -> list[tuple[float, float]]:
    return list(zip(values[:-1].tolist(), values[1:].tolist(), strict=True))


def _surface_ends(points: Array) -> tuple[int, int]:
    """Indices of the first and last point of the surface proper: a base drawn as points is cut off."""
    step = np.diff(points, axis=0)
    step /= np.linalg.norm(step, axis=1)[:, None]
    corner = np.append(False, np.sum(step[:-1] * step[1:], axis=1) < _CORNER)
    near = points[:, 0] > points[:, 0].max() - _EDGE
    size = len(points)
    lower = [i for i in range(1, size // 2) if near[i] and corner[i]]
    upper = [i for i in range(size - 2, size // 2, -1) if near[i] and corner[i]]
    return (lower[-1] if lower else 0), (upper[-1] if upper else size - 1)


def _arc_length_knots(points: Array) -> Array:
    """Arc length at each point of the spline through them, by fixed-point iteration from chord lengths."""
    nodes, weights = np.polynomial.legendre.leggauss(8)
    knots = np.append(0.0, np.cumsum(np.linalg.norm(np.diff(points, axis=0), axis=1)))
    for _ in range(4):
        spline = CubicSpline(knots, points)
        half = 0.5 * np.diff(knots)
        at = 0.5 * (knots[:-1] + knots[1:])[:, None] + half[:, None] * nodes
        speed = np.linalg.norm(spline(at, 1), axis=2)
        knots = np.append(0.0, np.cumsum(half * (speed @ weights)))
    return knots


def _nose(x_of: CubicSpline) -> float:
    """Arc length of the point of least x."""
    turns = np.asarray(x_of.derivative().roots(extrapolate=False), dtype=np.float64)
    turns = turns[np.isfinite(turns)]
    ends = x_of.x[[0, -1]]
    candidates = np.concatenate([turns, ends])
    return float(candidates[np.argmin(x_of(candidates))])
