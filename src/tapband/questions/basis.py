"""What planning starts from: the points to come, linearised once, and what any source adds at each demand.

D demands, S sources (declared and automatic). With independent sources variances add, so that a change of
instruments is a change of a few terms of a sum.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.jacobian import jacobian
from tapband.nouns.campaign import Campaign, Points
from tapband.nouns.source import Source
from tapband.probability.linearised import coverage_factor
from tapband.questions.forecasting import planned_for
from tapband.questions.targets import Demands, demands_of, require_targets
from tapband.reduction import Assembled, assemble
from tapband.reduction.loads import Loaded, load
from tapband.reduction.sensitivities import At, sensitivities

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Terms:
    """A source's terms at each demand (D,): its variance v, and v²/ν for Welch and Satterthwaite."""

    variance: Array
    quartic: Array


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Basis:
    """The points planned for, assembled, with the terms of each source as declared."""

    campaign: Campaign
    raw: Points
    assembled: Assembled
    demands: Demands
    names: tuple[str, ...]
    """Sources (S) in the order of the terms."""
    variance: Array
    """(D, S)"""
    quartic: Array
    """(D, S)"""
    slopes: tuple[At, ...]
    notes: tuple[str, ...]

    @property
    def level(self) -> float:
        """Level of confidence."""
        return self.campaign.intervals.level

    def terms(self, source: Source) -> Terms:
        """What a source would add that takes a declared one's place."""
        return _terms(load(source, self.campaign, self.raw, self.assembled.nominal), self)

    def expanded(self) -> Array:
        """(D,) expanded uncertainties as declared, linearised."""
        return expanded_of(self.variance.sum(axis=1), self.quartic.sum(axis=1), self.level)


def expanded_of(variance: Array, quartic: Array, level: float) -> Array:
    """U = k(ν) √V, ν = V²/Q, of total terms V and Q in any one shape (JCGM 100:2008, G.4.1 and G.6.4)."""
    with np.errstate(divide="ignore", invalid="ignore"):
        dof = np.where(quartic > 0.0, variance**2 / quartic, np.inf)
    return np.asarray(coverage_factor(dof, level) * np.sqrt(variance))


def basis_of(campaign: Campaign) -> Basis:
    """The basis of a campaign's plan; refuses one that has nothing to plan for."""
    plan = planned_for(campaign)
    points = plan.campaign.points
    assert points is not None
    assembled = assemble(plan.campaign)
    demands = demands_of(campaign, points, assembled.problem.outputs)
    require_targets(campaign, points, demands)
    variance = np.stack([np.sum(demands.of(s) ** 2, axis=-1) for s in assembled.problem.sensitivity], axis=-1)
    nu = np.stack([one.nu[demands.point] for one in assembled.loaded], axis=-1)
    return Basis(
        campaign=plan.campaign,
        raw=points,
        assembled=assembled,
        demands=demands,
        names=tuple(f.source for f in assembled.problem.families),
        variance=variance,
        quartic=variance**2 / nu,
        slopes=_slopes(assembled),
        notes=plan.notes,
    )


def _slopes(assembled: Assembled) -> tuple[At, ...]:
    """The derivatives of the chain at the points planned for."""
    points, stream = assembled.points, assembled.stream
    cp = np.where(assembled.nominal.live, assembled.cp, 0.0)
    found = []
    for one in assembled.sets:
        i = one.points
        channels = {k: v[i] for k, v in points.channels.items()}
        shifts = {k: v[i] for k, v in assembled.corrected.shifts.items()}
        part = type(stream)(
            q=stream.q[i], mach=stream.mach[i], p_static=stream.p_static[i], offset=stream.offset[i]
        )
        slope = jacobian(one.equation, cp[i], part, points.alpha[i], channels, shifts)
        found.append(At(points=i, live=one.equation.quadrature.live, cp=cp[i], q=stream.q[i], slopes=slope))
    return tuple(found)


def _terms(loaded: Loaded, basis: Basis) -> Terms:
    shape = basis.raw.readings.shape
    outputs = len(basis.assembled.problem.outputs)
    moved = sensitivities(loaded, basis.slopes, outputs, shape).coefficients
    variance = np.sum(basis.demands.of(moved) ** 2, axis=-1)
    return Terms(variance=variance, quartic=variance**2 / loaded.nu[basis.demands.point])
