"""What a reader should know of each fitted quantity: range, curvature, scatter, ends of range, selection."""

from __future__ import annotations

from math import degrees

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtrc, ndtr

from tapband.questions.fit_plan import QUANTITIES, FitPlan, Peak

Array = NDArray[np.float64]
SUSPECT = 0.05
"""Probability under which scatter about a line counts as more than the random part explains."""


def notes_of(
    plan: FitPlan, alpha: Array, y: Array, value: Array, u: Array, k: Array, level: float
) -> tuple[str, ...]:
    """One note (8,) a quantity; empty where there is nothing to say."""
    line = _line(plan, alpha, y[:, 0], value, u, k)
    top = _extreme(plan.highest, alpha, y[:, 0], plan.random_u, "highest lift", 1.0)
    bottom = _extreme(plan.lowest, alpha, y[:, 2], np.zeros_like(plan.random_u), "lowest pressure drag", -1.0)
    mach = [f"at Mach {plan.polar.mach:.3f}"] if plan.polar.one_of_several else []
    by_quantity = [line, line, line, line, top, top, bottom, line]
    return tuple("; ".join(mach + parts) for parts in by_quantity)


def _line(plan: FitPlan, alpha: Array, cl: Array, value: Array, u: Array, k: Array) -> list[str]:
    if not plan.linear.any():
        return ["fewer than three angles in the linear range: no line"]
    inside = alpha[plan.linear]
    how = "found" if plan.range_found else "stated"
    said = [f"linear range {degrees(inside[0]):.2f} to {degrees(inside[-1]):.2f} deg, {how}"]
    bend = QUANTITIES.index("curvature")
    if np.isfinite(value[bend]) and abs(value[bend]) > k[bend] * u[bend]:
        said.append(
            f"the lift curves there: quadratic term {value[bend]:.2g} ± {k[bend] * u[bend]:.1g} per deg²"
        )
    return said + _scatter(plan, alpha, cl)


def _scatter(plan: FitPlan, alpha: Array, cl: Array) -> list[str]:
    """Whether the points scatter about the line more than their random part explains (χ²)."""
    inside = plan.linear
    dof = int(np.count_nonzero(inside)) - 2
    u = plan.random_u[inside]
    if dof < 1 or not np.all(u > 0.0):
        return []
    w = plan.weights[inside]
    c = np.polyfit(alpha[inside], cl[inside], 1, w=np.sqrt(w))
    away = cl[inside] - np.polyval(c, alpha[inside])
    chi2 = float(np.sum((away / u) ** 2))
    p = float(chdtrc(dof, chi2))
    if p >= SUSPECT:
        return []
    scatter = float(np.sqrt(np.sum(away**2) / dof))
    return [
        f"points scatter about the line by {scatter:.2g}, more than their random part of "
        f"{np.sqrt(np.mean(u**2)):.2g} explains (p = {p:.1g}): the line does not hold, or a random source is "
        "missing"
    ]


def _extreme(peak: Peak, alpha: Array, y: Array, random: Array, what: str, sign: float) -> list[str]:
    if peak.at_end:
        at = degrees(alpha[peak.points[0]])
        top = int(peak.points[0])
        if top in (0, alpha.size - 1) or alpha[top] in (alpha[0], alpha[-1]):
            return [f"END OF RANGE: the {what} read is at {at:.2f} deg, an end of the polar; none was passed"]
        return [f"the {what} read, at {at:.2f} deg; no local parabola fits about it"]
    said = [f"local parabola through {peak.points.size} points"]
    bias = selection(sign * y, random)
    if bias > 0.0:
        said.append(
            f"the {what} read stands {bias:.1g} too far out on average, for being picked among {y.size}; "
            "the parabola leans on its neighbours and less so"
        )
    else:
        said.append(f"picked as the {what} read among {y.size}: random errors push such a pick outwards")
    return said


def selection(y: Array, u: Array) -> float:
    """How much the largest of readings (n,) with random errors ``u`` (n,) exceeds the largest true one.

    E max(y + e) − max y for independent normal e, by ∫ x dΠΦ.
    """
    if not np.any(u > 0.0):
        return 0.0
    top = float(y.max())
    reach = 8.0 * float(u.max())
    x = np.linspace(top - reach, top + reach, 801)
    scale = np.where(u > 0.0, u, 1e-12 * reach)
    below = np.prod(ndtr((x[:, None] - y) / scale), axis=1)
    area = float(np.sum(0.5 * (below[1:] + below[:-1]) * np.diff(x)))
    return float(x[-1]) - area - top
