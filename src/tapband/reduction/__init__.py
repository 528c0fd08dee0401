"""A campaign reduced: coefficients with intervals by two propagators, and all that questions need."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.screening import SUSPICIONS, flags
from tapband.experiment.stream import reynolds
from tapband.nouns.campaign import Campaign
from tapband.probability.coverage import agreement
from tapband.probability.linearised import Linearised, coverage_factor, propagate
from tapband.probability.montecarlo import MonteCarlo, run
from tapband.reduction.assemble import Assembled, assemble
from tapband.reduction.cluster import run_on
from tapband.reduction.processes import run_apart, workers_for

if TYPE_CHECKING:
    from distributed import Client

Array = NDArray[np.float64]
Progress = Callable[[int, int], None]

SHOWN = 4

__all__ = ["Assembled", "Reduced", "TapIntervals", "assemble", "reduce_campaign"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class TapIntervals:
    """Cp at each tap (P, n): standard and expanded uncertainty, and the screening flag."""

    u: Array
    U: Array
    flag: NDArray[np.object_]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Reduced:
    """The result of the main job. P points, m coefficients, n taps."""

    campaign: Campaign
    assembled: Assembled
    linear: Linearised
    montecarlo: MonteCarlo
    agrees: NDArray[np.bool_]
    """(P, m): the linearised interval is confirmed by Monte Carlo."""
    taps: TapIntervals
    condition_u: Array
    """(P, 3) standard uncertainty of alpha [rad], Mach number, q [Pa]."""
    reynolds: Array
    """(P,), NaN without a total temperature."""
    warnings: tuple[str, ...]

    @property
    def outputs(self) -> tuple[str, ...]:
        """Names of the coefficients (m)."""
        return self.assembled.problem.outputs

    @property
    def headline(self) -> tuple[Array, Array]:
        """Ends (P, m) of the interval to quote: linearised where Monte Carlo confirms it, else Monte Carlo."""
        low = np.where(self.agrees, self.linear.low, self.montecarlo.low)
        high = np.where(self.agrees, self.linear.high, self.montecarlo.high)
        return low, high

    @property
    def headline_expanded(self) -> Array:
        """Half-width (P, m) of the interval to quote."""
        low, high = self.headline
        return np.asarray(0.5 * (high - low))


def reduce_campaign(
    campaign: Campaign,
    trials: str | None = None,
    seed: int | None = None,
    progress: Progress | None = None,
    threads: int | None = None,
    client: Client | None = None,
) -> Reduced:
    """The main job: every coefficient of every point, by both propagators.

    ``threads`` None: as many as there are processors, and processes where the points are many. Neither changes a row.
    """
    intervals = campaign.intervals
    intervals = replace(
        intervals,
        trials=intervals.trials if trials is None else trials,
        seed=intervals.seed if seed is None else seed,
    )
    campaign = replace(campaign, intervals=intervals)
    assembled = assemble(campaign)
    linear = propagate(assembled.problem, intervals.level)
    problem, plan = assembled.problem, (intervals.level, intervals.trials, intervals.seed)
    workers = workers_for(len(problem.alpha)) if threads is None else 0
    if client is not None:
        drawn = run_on(client, problem, *plan, progress=progress)
    elif workers:
        drawn = run_apart(problem, plan, workers, progress)
    else:
        drawn = run(problem, *plan, threads=threads, progress=progress)
    return finish(campaign, assembled, linear, drawn)


def finish(campaign: Campaign, assembled: Assembled, linear: Linearised, drawn: MonteCarlo) -> Reduced:
    """All that follows from the two propagations."""
    points = assembled.points
    number = np.full(len(points.names), np.nan)
    if points.t_total is not None:
        number = reynolds(
            assembled.stream.mach,
            assembled.stream.p_static,
            points.t_total,
            campaign.section.chord + assembled.corrected.chord,
        )
    taps = _taps(assembled, campaign.intervals.level)
    return Reduced(
        campaign=campaign,
        assembled=assembled,
        linear=linear,
        montecarlo=drawn,
        agrees=agreement(linear, drawn),
        taps=taps,
        condition_u=np.sqrt(assembled.condition_variance.sum(axis=2)),
        reynolds=number,
        warnings=campaign.warnings + assembled.warnings + _said(assembled, drawn) + _flagged(assembled, taps),
    )


def _taps(assembled: Assembled, level: float) -> TapIntervals:
    """Cp intervals, linearised, with Welch-Satterthwaite degrees of freedom of their own."""
    variance = assembled.cp_variance
    u2 = variance.sum(axis=2)
    nu = np.stack([one.nu for one in assembled.loaded], axis=-1)[:, None, :]
    with np.errstate(invalid="ignore", divide="ignore"):
        terms = np.sum(variance**2 / nu, axis=2)
        dof = np.where(terms > 0.0, u2**2 / terms, np.inf)
    u, stream = np.sqrt(u2), assembled.stream
    text = np.full(u.shape, "", dtype=object)
    for one in assembled.sets:
        i = one.points
        text[i] = flags(
            one.equation.quadrature,
            assembled.s,
            assembled.cp[i],
            u[i],
            stream.mach[i],
            assembled.nominal.reading[i],
            assembled.campaign.taps.full_scale,
            stream.p_static[i, None] + assembled.cp[i] * stream.q[i, None],
        )
    return TapIntervals(u=u, U=coverage_factor(dof, level) * u, flag=text)


def _said(assembled: Assembled, drawn: MonteCarlo) -> tuple[str, ...]:
    """What people must know of the points and of the trials."""
    points, taps = assembled.points, assembled.campaign.taps
    said = [str(c) for c in assembled.corrected.made]
    lost = ~assembled.nominal.live & ~taps.excluded
    for p in np.flatnonzero(lost.any(axis=1)):
        names = ", ".join(np.array(taps.names)[lost[p]])
        said.append(f"{points.keys[p]}: left out for want of a reading: {names}")
    for p in np.flatnonzero(drawn.refused > 0):
        count = int(drawn.refused[p])
        said.append(f"{points.keys[p]}: {count} trials had no valid state; they are counted, not replaced")
    short = ~drawn.reached & np.isfinite(assembled.problem.estimate)
    for p in np.flatnonzero(short.any(axis=1)):
        names = ", ".join(np.array(assembled.problem.outputs)[short[p]])
        said.append(f"{points.keys[p]}: Monte Carlo did not reach its tolerance for {names}")
    return tuple(said)


def _flagged(assembled: Assembled, taps: TapIntervals) -> tuple[str, ...]:
    """One line for each kind of suspicion, with the readings it falls on."""
    names, keys = assembled.campaign.taps.names, assembled.points.keys
    said = []
    for kind in SUSPICIONS:
        where = [(p, i) for p, i in np.argwhere(taps.flag != "").tolist() if kind in taps.flag[p, i]]
        if where:
            some = ", ".join(f"{names[i]} at {keys[p]}" for p, i in where[:SHOWN])
            more = f" and {len(where) - SHOWN} more in cp.csv" if len(where) > SHOWN else ""
            said.append(f"{len(where)} readings flagged {kind}, used all the same: {some}{more}")
    return tuple(said)
