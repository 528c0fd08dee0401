"""What is fitted to a polar: which points each quantity draws on, and their weights.

The estimators are analytic and vectorised over leading axes, so that one function serves the estimate, its
derivatives by complex step, and every Monte Carlo trial. Points and weights stay as planned in all of them.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import pi
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.plan import Polar as Asked
from tapband.questions import linear_range
from tapband.questions.latents import Latents
from tapband.questions.polars import Polar, random_variance, smoothed

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
Values = NDArray[Any]

QUANTITIES = (
    "cl_slope", "alpha_zero_lift", "cm_zero_lift", "aerodynamic_centre", "cl_max", "alpha_cl_max",
    "cd_pressure_min", "curvature",
)  # fmt: skip
"""What a plan estimates; the curvature [per deg²] of the lift in the linear range is for the note."""
OUTPUTS = ("cl", "cm", "cd_pressure")
DEGREE = pi / 180.0
WIDE, NARROW = (2, 1.5 * DEGREE), (1, 0.75 * DEGREE)
"""Reach of the local parabola, and of the narrower one it is checked with: distinct angles to either side,
or an angle [rad] where that is more."""
STEP = 1e-30


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Peak:
    """A local extreme: the points (k,) of its parabola; one alone where it stands at the end of the range."""

    points: NDArray[np.int64]
    weights: Array
    narrow: NDArray[np.int64]
    """Points of the narrower parabola; the same where there is none."""

    @property
    def at_end(self) -> bool:
        """Whether the extreme reading is the first or the last of the polar."""
        return self.points.size == 1


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class FitPlan:
    """How one polar of n points is fitted."""

    polar: Polar
    linear: Mask
    range_found: bool
    weights: Array
    """(n,) of the straight lines, zero outside the linear range."""
    random_u: Array
    """(n,) random standard uncertainty of cl about the line, as read (not smoothed)."""
    highest: Peak
    lowest: Peak
    centre: float
    """Moment centre [x/c]."""

    def estimate(self, alpha: Values, y: Values, off_centre: Values | float = 0.0) -> Values:
        """(…, 8) from alpha (…, n) [rad], cl, cm, cd_pressure (…, n, 3), and the moment centre's error."""
        cl, cm, cd = y[..., 0], y[..., 1], y[..., 2]
        top, at_top = _extreme(self.highest.points, self.highest.weights, alpha, cl)
        bottom, _ = _extreme(self.lowest.points, self.lowest.weights, alpha, cd)
        if self.linear.any():
            line = self._line(alpha, cl, cm)
            line[3] = line[3] + off_centre
        else:
            line = [np.full(top.shape, np.nan, dtype=top.dtype)] * 5
        *first, bend = line
        return np.stack([*first, top, at_top / DEGREE, bottom, bend], axis=-1)

    def _line(self, alpha: Values, cl: Values, cm: Values) -> list[Values]:
        w = self.weights / self.weights.sum()
        middle = (w * alpha).sum(axis=-1)
        x = alpha - middle[..., None]
        square = (w * x * x).sum(axis=-1)
        slope = (w * x * cl).sum(axis=-1) / square
        moment = (w * x * cm).sum(axis=-1) / square
        lift, pitch = (w * cl).sum(axis=-1), (w * cm).sum(axis=-1)
        rate = moment / slope
        zero = middle - lift / slope
        return [slope * DEGREE, zero / DEGREE, pitch - rate * lift, self.centre - rate, self._bend(x, cl)]

    def _bend(self, x: Values, cl: Values) -> Values:
        """Quadratic term of the lift in the linear range [per deg²]; NaN from fewer than four points."""
        if np.count_nonzero(self.weights) < 4:
            return np.full(x.shape[:-1], np.nan, dtype=x.dtype)
        return _parabola(x, cl, self.weights)[..., 2] * DEGREE**2

    def local_check(self, alpha: Array, y: Array) -> Array:
        """(8,) half-widths of what the local fits may err: how far they move without their outer points."""
        moved = np.zeros(len(QUANTITIES))
        for peak, output, places in ((self.highest, 0, (4, 5)), (self.lowest, 2, (6,))):
            if peak.narrow.size == peak.points.size:
                continue
            wide = _extreme(peak.points, peak.weights, alpha, y[:, output])
            less = _extreme(peak.narrow, np.ones(peak.narrow.size), alpha, y[:, output])
            for place, one, other in zip(places, wide, less, strict=False):
                moved[place] = abs(float(one - other)) / (DEGREE if place == 5 else 1.0)
        return moved


def _extreme(points: NDArray[np.int64], weights: Array, alpha: Values, y: Values) -> tuple[Values, Values]:
    """Value and angle of the extreme (…,): the vertex of a parabola, or the reading at the end."""
    near, values = alpha[..., points], y[..., points]
    if points.size == 1:
        return values[..., 0], near[..., 0]
    middle = near.mean(axis=-1)
    c = _parabola(near - middle[..., None], values, weights)
    shift = -0.5 * c[..., 1] / c[..., 2]
    return c[..., 0] + 0.5 * c[..., 1] * shift, middle + shift


def _parabola(x: Values, y: Values, weights: Array) -> Values:
    """Coefficients (…, 3) of the weighted least-squares parabola; x is near zero."""
    size = float(np.max(np.abs(x.real)))
    basis = np.stack([np.ones_like(x), x / size, (x / size) ** 2], axis=-1)
    weighted = basis * weights[:, None]
    matrix = np.swapaxes(weighted, -1, -2) @ basis
    right = np.swapaxes(weighted, -1, -2) @ y[..., None]
    c = np.linalg.solve(matrix, right)[..., 0]
    return np.asarray(c / np.array([1.0, size, size * size]))


def derivatives(plan: FitPlan, alpha: Array, y: Array) -> tuple[Array, Array]:
    """∂/∂y (n, 8, 3) and ∂/∂alpha (n, 8) of the estimates: lines by formula, parabolas by complex step."""
    by_y, by_alpha = np.zeros((alpha.size, 8, 3)), np.zeros((alpha.size, 8))
    if plan.linear.any():
        inside = np.flatnonzero(plan.linear)
        by_y[inside], by_alpha[inside] = _line_slopes(alpha[inside], y[inside], plan.weights[inside])
    for peak, output, places in ((plan.highest, 0, (4, 5)), (plan.lowest, 2, (6,))):
        own, angle = _extreme_slopes(peak, alpha, y[:, output])
        for i, place in enumerate(places):
            unit = DEGREE if place == 5 else 1.0
            by_y[peak.points, place, output] = own[:, i] / unit
            by_alpha[peak.points, place] = angle[:, i] / unit
    return by_y, by_alpha


def _line_slopes(alpha: Array, y: Array, weights: Array) -> tuple[Array, Array]:
    """Derivatives (n, 8, 3) and (n, 8) of what the straight lines give.

    With x and y about their weighted means and b = Σ w x y/Σ w x²: ∂b/∂y = w x/Σ w x²,
    ∂b/∂x = w (y − 2 b x)/Σ w x².
    """
    w = weights / weights.sum()
    x = alpha - w @ alpha
    square = float(w @ (x * x))
    lift = w @ y[:, 0]
    b, m = (float((w * x) @ y[:, j]) / square for j in (0, 1))
    rate = m / b
    by_y = w * x / square
    b_x, m_x = (w * (y[:, j] - (w @ y[:, j]) - 2.0 * slope * x) / square for j, slope in ((0, b), (1, m)))
    own, angle = np.zeros((x.size, 8, 3)), np.zeros((x.size, 8))
    own[:, 0, 0], angle[:, 0] = by_y * DEGREE, b_x * DEGREE
    own[:, 1, 0] = (lift / b**2 * by_y - w / b) / DEGREE
    angle[:, 1] = (w + lift / b**2 * b_x) / DEGREE
    rate_cl, rate_cm, rate_x = -rate / b * by_y, by_y / b, m_x / b - rate / b * b_x
    own[:, 2, 0], own[:, 2, 1] = -rate * w - lift * rate_cl, w - lift * rate_cm
    angle[:, 2] = -lift * rate_x
    own[:, 3, 0], own[:, 3, 1], angle[:, 3] = -rate_cl, -rate_cm, -rate_x
    if x.size > 3:
        own[:, 7, 0], angle[:, 7] = _bend_slopes(x, y[:, 0], weights)
    return own, angle


def _bend_slopes(x: Array, y: Array, weights: Array) -> tuple[Array, Array]:
    """Derivatives (n,) of the quadratic term [per deg²] by y and by x.

    With basis X, normal matrix A and residuals r: ∂c/∂x_i = w_i A⁻¹ (X'_i r_i − X_i (X'_i c)).
    """
    size = float(np.max(np.abs(x)))
    v = x / size
    basis = np.stack([np.ones_like(v), v, v * v], axis=1)
    rise = np.stack([np.zeros_like(v), np.ones_like(v), 2.0 * v], axis=1) / size
    inverse = np.linalg.inv((basis * weights[:, None]).T @ basis)
    c = inverse @ (basis.T @ (weights * y))
    left, slope = y - basis @ c, rise @ c
    third = inverse[2] * DEGREE**2 / size**2
    return weights * (basis @ third), weights * ((rise @ third) * left - (basis @ third) * slope)


def _extreme_slopes(peak: Peak, alpha: Array, y: Array) -> tuple[Array, Array]:
    """Derivatives (k, 2) of value and angle of an extreme by its readings and angles, by complex step."""
    k = peak.points.size
    own = np.arange(k)
    results = []
    for i in (0, 1):
        near = np.broadcast_to(alpha[peak.points], (k, k)).astype(np.complex128)
        values = np.broadcast_to(y[peak.points], (k, k)).astype(np.complex128)
        (values, near)[i][own, own] += 1j * STEP
        moved = _extreme(own, peak.weights, near, values)
        results.append(np.stack([part.imag for part in moved], axis=1) / STEP)
    return results[0], results[1]


def plan_of(latents: Latents, polar: Polar, asked: Asked, centre: float) -> FitPlan:
    """The plan for one polar; ``centre`` is the moment centre [x/c]."""
    points = polar.points
    alpha = latents.alpha[points]
    cl, cd = (latents.estimate[points, latents.outputs.index(name)] for name in ("cl", "cd_pressure"))
    lift = latents.outputs.index("cl")
    slope = float(np.polyfit(alpha, cl, 1)[0])
    random = np.sqrt(random_variance(latents, points, lift, slope))
    if asked.linear_range is None:
        linear = linear_range.found(alpha, cl, random, polar.level)
    else:
        linear = linear_range.stated(alpha, asked.linear_range)
    if np.unique(polar.level[linear]).size < 3:
        linear = np.zeros_like(linear)
    weights = np.zeros(points.size)
    if linear.any():
        slope = float(np.polyfit(alpha[linear], cl[linear], 1)[0])
        variance = random_variance(latents, points[linear], lift, slope)
        weights[linear] = 1.0 / smoothed(alpha[linear], variance)
        weights /= weights.max()
        random[linear] = np.sqrt(variance)
    return FitPlan(
        polar=polar,
        linear=linear,
        range_found=asked.linear_range is None,
        weights=weights,
        random_u=random,
        highest=_peak(alpha, polar.level, cl, 1.0),
        lowest=_peak(alpha, polar.level, cd, -1.0),
        centre=centre,
    )


def _peak(alpha: Array, level: NDArray[np.int64], y: Array, sign: float) -> Peak:
    """The local parabola about the extreme reading; the narrow one where the wide one is no cap."""
    top = int(np.argmax(sign * y))
    alone = Peak(points=np.array([top]), weights=np.ones(1), narrow=np.array([top]))
    if level[top] in (level[0], level[-1]):
        return alone
    wide, narrow = (_about(alpha, level, top, *reach) for reach in (WIDE, NARROW))
    for points in (wide, narrow):
        if _caps(alpha[points], y[points], sign):
            return Peak(points=points, weights=np.ones(points.size), narrow=narrow)
    return alone


def _about(alpha: Array, level: NDArray[np.int64], top: int, steps: int, reach: float) -> NDArray[np.int64]:
    """Points so many distinct angles, or so far, to either side of one; cut alike where the polar ends."""
    steps = min(steps, int(level[top] - level[0]), int(level[-1] - level[top]))
    reach = min(reach, alpha[top] - alpha[0], alpha[-1] - alpha[top])
    near = (np.abs(level - level[top]) <= steps) | (np.abs(alpha - alpha[top]) <= reach)
    return np.flatnonzero(near)


def _caps(alpha: Array, y: Array, sign: float) -> bool:
    """Whether the parabola bends the right way and has its vertex among its points."""
    _, at = _extreme(np.arange(alpha.size), np.ones(alpha.size), alpha, y)
    bend = np.polyfit(alpha - alpha.mean(), y, 2)[0]
    return bool(sign * bend < 0.0 and alpha[0] <= at <= alpha[-1])
