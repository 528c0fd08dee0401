"""Quantities of a polar with their intervals: slope, zero lift, moments, aerodynamic centre, extremes.

Lines are weighted by the random part alone, smoothed over the angle: weights that hold shared multiplicative
terms of measured values would pull the slope low (Peelle's puzzle). The covariance is that of the whole:
every source goes through the derivatives of the estimate, its errors of angle among them, so that a shared
angle error shifts the zero-lift angle and a random one acts as effective variance.

*Source* R. W. Peelle (1987), told by Chiba and Smith, ANL/NDM-121 (1991), from memory; JCGM 100:2008, 5.2.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.plan import Polar as Asked
from tapband.questions.combine import Combination, Spread, spread
from tapband.questions.fit_notes import notes_of
from tapband.questions.fit_plan import OUTPUTS, QUANTITIES, FitPlan, derivatives, plan_of
from tapband.questions.latents import Latents
from tapband.questions.polars import Polar, polars

Array = NDArray[np.float64]
SHOWN = QUANTITIES[:-1]
"""Quantities of the table of fits."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Fits:
    """R polars, eight quantities each (:data:`QUANTITIES`); arrays (R, 8)."""

    plans: tuple[FitPlan, ...]
    value: Array
    u: Array
    dof: Array
    k: Array
    U: Array
    used: NDArray[np.int64]
    """Points a quantity draws on."""
    notes: tuple[tuple[str, ...], ...]
    """(R, 8)."""
    spread: Spread
    combination: Combination
    local: Array
    """(R, 8) half-widths of what the local parabolas may err."""


def fits(latents: Latents, asked: Asked, centre: float, level: float) -> Fits | None:
    """Every polar of a campaign; None where there is none. ``centre`` is the moment centre [x/c]."""
    found = polars(latents, asked.same_angle)
    return fitted(latents, found, asked, centre, level) if found else None


def fitted(latents: Latents, found: Sequence[Polar], asked: Asked, centre: float, level: float) -> Fits:
    """The quantities of some polars, at least one."""
    plans = tuple(plan_of(latents, polar, asked, centre) for polar in found)
    data = [readings(latents, plan) for plan in plans]
    value = np.stack([plan.estimate(alpha, y) for plan, (alpha, y) in zip(plans, data, strict=True)])
    combination = _combination(latents, plans, data)
    local = np.stack([plan.local_check(alpha, y) for plan, (alpha, y) in zip(plans, data, strict=True)])
    total = spread(latents, combination).plus(local**2 / 3.0)
    blank = np.where(np.isfinite(value), 0.0, np.nan)
    u, k = total.u + blank, total.k(level) + blank
    used = np.stack([_used(plan) for plan in plans])
    return Fits(
        plans=plans,
        value=value,
        u=u,
        dof=total.dof + blank,
        k=k,
        U=k * u,
        used=used,
        notes=tuple(
            notes_of(plan, alpha, y, value[r], u[r], k[r], level)
            for r, (plan, (alpha, y)) in enumerate(zip(plans, data, strict=True))
        ),
        spread=total,
        combination=combination,
        local=local,
    )


def readings(latents: Latents, plan: FitPlan) -> tuple[Array, Array]:
    """alpha (n,) [rad] and cl, cm, cd_pressure (n, 3) of a polar."""
    points = plan.polar.points
    columns = [latents.outputs.index(name) for name in OUTPUTS]
    return latents.alpha[points], latents.estimate[points][:, columns]


def _combination(
    latents: Latents, plans: Sequence[FitPlan], data: Sequence[tuple[Array, Array]]
) -> Combination:
    """The estimates as linear combinations, by their derivatives; the moment centre enters its own place."""
    columns = [latents.outputs.index(name) for name in OUTPUTS]
    weights, angles, centres = [], [], []
    for plan, (alpha, y) in zip(plans, data, strict=True):
        by_y, by_alpha = derivatives(plan, alpha, y)
        weight = np.zeros((alpha.size, len(QUANTITIES), len(latents.outputs)))
        weight[:, :, columns] = np.nan_to_num(by_y)
        centre = np.zeros((alpha.size, len(QUANTITIES)))
        centre[:, QUANTITIES.index("aerodynamic_centre")] = 1.0 / alpha.size
        weights.append(weight)
        angles.append(np.nan_to_num(by_alpha))
        centres.append(centre)
    sizes = [plan.polar.points.size for plan in plans]
    return Combination(
        rows=len(plans),
        row=np.repeat(np.arange(len(plans)), sizes),
        point=np.concatenate([plan.polar.points for plan in plans]),
        weight=np.concatenate(weights),
        on_alpha=np.concatenate(angles),
        on_centre=np.concatenate(centres),
    )


def _used(plan: FitPlan) -> NDArray[np.int64]:
    line = int(np.count_nonzero(plan.linear))
    top, bottom = plan.highest.points.size, plan.lowest.points.size
    return np.array([line, line, line, line, top, top, bottom, line])
