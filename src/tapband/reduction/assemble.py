"""From a checked campaign to equations, latents and sensitivities."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.chain import REFERENCE, Equation, Inputs, evaluate
from tapband.experiment.contour import Contour
from tapband.experiment.jacobian import jacobian
from tapband.experiment.rowwise import each_row
from tapband.experiment.rule import concerns, refused
from tapband.experiment.stream import Stream, solve
from tapband.nouns.campaign import Campaign, Points
from tapband.nouns.symbols import MEASURED
from tapband.reduction.automatic import automatic, scatter
from tapband.reduction.corrections import Corrected, correct
from tapband.reduction.live_sets import LiveSet, contour_of, live_sets
from tapband.reduction.loads import Loaded, load
from tapband.reduction.nominal import Nominal, nominal_of
from tapband.reduction.problem import CampaignProblem
from tapband.reduction.samples import Scatter, sample_scatter
from tapband.reduction.sensitivities import At, sensitivities

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Assembled:
    """Everything that propagation and its questions need. P points, n taps, m coefficients."""

    campaign: Campaign
    contour: Contour
    s: Array
    """(n,) arc length of the taps, corrections in it."""
    points: Points
    """Corrected."""
    corrected: Corrected
    nominal: Nominal
    sets: tuple[LiveSet, ...]
    loaded: tuple[Loaded, ...]
    problem: CampaignProblem
    stream: Stream
    cp: Array
    """(P, n), NaN at dead taps."""
    cp_variance: Array
    """(P, n, S) variance of each tap's Cp by source."""
    condition_variance: Array
    """(P, 3, S) variance of alpha [rad²], Mach number, q [Pa²] by source."""
    warnings: tuple[str, ...]
    samples: Scatter | None = None
    """Of repeated rows; None where every point has one."""


def assemble(campaign: Campaign) -> Assembled:
    """Equations, latents and sensitivities of every point of a campaign that has readings."""
    raw = campaign.points
    assert raw is not None, "a campaign without readings is forecast, not reduced"
    contour = contour_of(campaign)
    nominal = nominal_of(campaign, raw, contour.tangent(campaign.taps.s)[0])
    outputs = MEASURED if campaign.reduction.compressibility == "none" else MEASURED + REFERENCE
    corrected = correct(campaign, raw, nominal, len(outputs))
    if corrected.chord and campaign.section.contour_in_lengths:
        contour = contour_of(campaign, corrected.chord)
    s = campaign.taps.s + corrected.location
    points = corrected.points
    sets = live_sets(campaign, contour, s, nominal.live, edge=corrected.edge, centre=corrected.centre)
    stream = solve(campaign.stream, campaign.pressures, points.channels, **corrected.shifts)
    cp = (points.readings + stream.offset[:, None]) / stream.q[:, None] + corrected.extra
    cp = np.where(nominal.live, cp, 0.0)
    ok, warnings = _rule_holds(campaign, sets, cp, stream.mach, points.keys)
    loaded = [load(source, campaign, raw, nominal) for source in campaign.sources]
    loaded += automatic(campaign, sets, cp, stream.mach, points.alpha, len(outputs))
    estimate = np.empty((len(points.names), len(outputs)))
    slopes: list[At] = []
    for one in sets:
        i = one.points
        estimate[i] = _estimate(one.equation, points, corrected, nominal, i)
        channels = {k: v[i] for k, v in points.channels.items()}
        slope = jacobian(
            one.equation,
            cp[i],
            _rows(stream, i),
            points.alpha[i],
            channels,
            {k: v[i] for k, v in corrected.shifts.items()},
        )
        slopes.append(At(points=i, live=one.equation.quadrature.live, cp=cp[i], q=stream.q[i], slopes=slope))
    estimate[~ok, len(MEASURED) :] = np.nan
    samples = None
    if raw.blocks is not None:
        samples = sample_scatter(campaign, corrected, sets, raw, outputs)
        loaded.append(scatter(samples.factor, samples.batches, points.keys))
        warnings += samples.warnings
    parts = [sensitivities(one, slopes, len(outputs), cp.shape) for one in loaded]
    problem = CampaignProblem(
        sets=sets,
        loaded=loaded,
        reading=np.where(nominal.live, points.readings, 0.0),
        extra=corrected.extra if np.any(corrected.extra) else None,
        alpha=points.alpha,
        channels=points.channels,
        shifts=corrected.shifts,
        added=corrected.added,
        outputs=outputs,
        estimate=estimate,
        sensitivity=[p.coefficients for p in parts],
    )
    return Assembled(
        campaign=campaign,
        contour=contour,
        s=s,
        points=points,
        corrected=corrected,
        nominal=nominal,
        sets=sets,
        loaded=tuple(loaded),
        problem=problem,
        stream=stream,
        cp=np.where(nominal.live, cp, np.nan),
        cp_variance=np.stack([p.cp_variance for p in parts], axis=-1),
        condition_variance=np.stack([p.condition_variance for p in parts], axis=-1),
        warnings=warnings,
        samples=samples,
    )


def _rows(stream: Stream, rows: NDArray[np.int64]) -> Stream:
    return Stream(
        q=stream.q[rows], mach=stream.mach[rows], p_static=stream.p_static[rows], offset=stream.offset[rows]
    )


def _estimate(
    equation: Equation, points: Points, corrected: Corrected, nominal: Nominal, rows: NDArray[np.int64]
) -> Array:
    one = (rows, None)  # a second axis of one trial: rows are then computed one by one
    inputs = Inputs(
        reading=np.where(nominal.live, points.readings, 0.0)[one],
        alpha=points.alpha[one],
        channels={k: v[one] for k, v in points.channels.items()},
        extra=corrected.extra[one],
        mach_shift=_of(corrected.shifts, "mach_shift", rows),
        q_shift=_of(corrected.shifts, "q_shift", rows),
        added=corrected.added[one],
    )
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(evaluate(equation, inputs)[:, 0])


def _of(values: Mapping[str, Array], name: str, rows: NDArray[np.int64]) -> Array | None:
    return values[name][rows, None] if name in values else None


def _rule_holds(
    campaign: Campaign, sets: Sequence[LiveSet], cp: Array, mach: Array, keys: Sequence[str]
) -> tuple[NDArray[np.bool_], tuple[str, ...]]:
    """Which points (P,) the compressibility rule and its bound hold at, and what to warn of."""
    ok = np.ones(len(cp), dtype=np.bool_)
    rule, reference = campaign.reduction.compressibility, campaign.reduction.reference_mach
    if rule == "none":
        return ok, ()
    said = []
    for one in sets:
        q = one.equation.quadrature
        nodes = each_row(cp[one.points], q.nodes_of.T) + q.nodes_constant
        for point, values in zip(one.points.tolist(), nodes, strict=True):
            m = float(mach[point])
            for name in dict.fromkeys((rule, "karman-tsien")):
                if bool(np.any(refused(values, np.asarray(m), reference, name))):
                    ok[point] = False
                    why = (
                        "does not hold" if name == rule else "bounds the choice of the rule and does not hold"
                    )
                    said.append(
                        f"{keys[point]}: {name} {why} at Mach {m:.3f} with a least Cp of {values.min():.3f} "
                        "(near its pole, past vacuum or supersonic); the reference columns are empty"
                    )
                    break
            if ok[point]:
                said += [f"{keys[point]}: {text}" for text in concerns(values, m, reference, rule)]
    return ok, tuple(said)
