"""One point of a campaign taken out whole, so that it can be ranked without reducing the others."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.stream import Stream
from tapband.nouns.campaign import Campaign, Points
from tapband.probability.linearised import propagate
from tapband.probability.montecarlo import run
from tapband.questions.latents import latents_at
from tapband.reduction import Reduced, finish
from tapband.reduction.assemble import Assembled, assemble
from tapband.reduction.nominal import Nominal

Array = NDArray[np.float64]


def reduced_at(campaign: Campaign, point: str, trials: str, seed: int) -> Reduced:
    """The point alone, by both propagators; its rows are those that the whole campaign would give.

    ``point`` is POINT, or RUN/POINT where POINT alone is ambiguous.
    """
    intervals = replace(campaign.intervals, trials=trials, seed=seed)
    campaign = replace(campaign, intervals=intervals)
    whole = assemble(campaign)
    one = only(whole, latents_at(whole).index(point))
    linear = propagate(one.problem, intervals.level)
    drawn = run(one.problem, intervals.level, trials, seed)
    return finish(one.campaign, one, linear, drawn)


def only(assembled: Assembled, index: int) -> Assembled:
    """The assembled campaign with one point left."""
    rows = slice(index, index + 1)
    problem = assembled.problem.part(rows)
    raw = assembled.campaign.points
    assert raw is not None, "an assembled campaign has points"
    corrected, stream = assembled.corrected, assembled.stream
    mine = f"{raw.keys[index]}: "
    return replace(
        assembled,
        campaign=replace(assembled.campaign, points=_points(raw, rows)),
        points=_points(assembled.points, rows),
        corrected=replace(
            corrected,
            points=_points(corrected.points, rows),
            extra=corrected.extra[rows],
            shifts={name: values[rows] for name, values in corrected.shifts.items()},
            added=corrected.added[rows],
        ),
        nominal=_nominal(assembled.nominal, rows),
        sets=tuple(problem.sets),
        loaded=tuple(problem.loaded),
        problem=problem,
        stream=Stream(
            q=stream.q[rows],
            mach=stream.mach[rows],
            p_static=stream.p_static[rows],
            offset=stream.offset[rows],
        ),
        cp=assembled.cp[rows],
        cp_variance=assembled.cp_variance[rows],
        condition_variance=assembled.condition_variance[rows],
        warnings=tuple(said for said in assembled.warnings if said.startswith(mine)),
    )


def _points(points: Points, rows: slice) -> Points:
    return replace(
        points,
        names=points.names[rows],
        runs=points.runs[rows],
        columns={name: values[rows] for name, values in points.columns.items()},
        alpha=points.alpha[rows],
        channels={name: values[rows] for name, values in points.channels.items()},
        readings=points.readings[rows],
        t_total=_part(points.t_total, rows),
        nominal_alpha=_part(points.nominal_alpha, rows),
        nominal_mach=_part(points.nominal_mach, rows),
        counts=points.counts[rows],
        blocks=None,
    )


def _nominal(nominal: Nominal, rows: slice) -> Nominal:
    return replace(
        nominal,
        reading=nominal.reading[rows],
        live=nominal.live[rows],
        channels={name: values[rows] for name, values in nominal.channels.items()},
        alpha=nominal.alpha[rows],
        mach=nominal.mach[rows],
        q=nominal.q[rows],
        cp=nominal.cp[rows],
        factor=_part(nominal.factor, rows),
    )


def _part(values: Array | None, rows: slice) -> Array | None:
    return None if values is None else values[rows]
