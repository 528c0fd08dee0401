"""Where the taps of a number should be, and what the number buys.

A layout is judged by its true error on flows that are known exactly: the section's own at the angles planned
for, and sections of other thickness and camber, so that what is found does not live off one flow's accidents.
The written interval, finite tap spacing in it, is given beside it and never minimised: its spacing term has
zeros, and a layout that seeks them starves the nose.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.contour import Contour
from tapband.experiment.tap_flows import TapFlow, arc_length, tap_flow, tau_of, thickness_of, varied
from tapband.nouns.campaign import Closure
from tapband.nouns.errors import QuestionError
from tapband.nouns.plan import Layout
from tapband.questions.basis import Basis
from tapband.questions.layout_search import Frame, Judge, searched
from tapband.questions.new_taps import expected_at, tap_names, worst_interval
from tapband.questions.tap_errors import tap_errors

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
Progress = Callable[[int, int], None]

FAMILY = ((0.09, 0.0), (0.12, 0.02), (0.15, -0.015), (0.18, 0.01), (0.105, -0.01), (0.135, 0.03))
"""Thickness, and camber added to the section's own [chords], of the other sections a layout is judged on."""
ANGLES = 9
ITERATIONS, FIRST_LOOK = 60, 8
LADDER = (0.4, 0.5, 0.65, 0.8, 1.0, 1.25, 1.6, 2.0)
"""Numbers of taps looked at, in parts of the number asked for."""
LADDER_SHARE = 8
"""Steps for the number asked for, over those for each other number."""
FEWEST = 7


@dataclass(frozen=True, slots=True, kw_only=True)
class Judged:
    """One layout of one number of taps: the worst interval over target, and the worst true rms error over it."""

    taps: int
    layout: str
    interval: float
    error: float


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LayoutChoice:
    """The layout found: arc lengths (n,) [chords] and names; and all that were judged."""

    s: Array
    names: tuple[str, ...]
    x: Array
    y: Array
    judged: tuple[Judged, ...]

    def of(self, layout: str) -> Judged:
        """The judgement of a layout of the number asked for."""
        return next(one for one in self.judged if one.layout == layout and one.taps == self.s.size)


def layout_choice(
    basis: Basis, progress: Progress | None = None, iterations: int | None = None
) -> LayoutChoice:
    """The layout that the campaign asks for, and what others and other numbers of taps would do."""
    steps = ITERATIONS if iterations is None else iterations
    s, judge = places(basis, steps, progress)
    wanted, contour, end = require_layout(basis), basis.assembled.contour, _end(basis)
    live = basis.assembled.nominal.live.any(axis=0)
    plain = ((name, arc_length(contour, row(wanted.taps, end))) for name, row in PLAIN.items())
    layouts = [("found", s), *plain]
    layouts += _ladder(judge, wanted, end, tau_of(contour, s), steps // LADDER_SHARE)
    layouts.append(("present", np.sort(basis.assembled.s[live])))
    x, y = contour.point(s)
    names = tap_names(s, _fixed(basis))
    return LayoutChoice(s=s, names=names, x=x, y=y, judged=_judged(basis, judge, layouts))


def places(basis: Basis, iterations: int, progress: Progress | None = None) -> tuple[Array, Judge]:
    """Rising arc lengths (n,) [chords] of the layout asked for, and what judged it."""
    wanted, end = require_layout(basis), _end(basis)
    limit, alpha = _limits(basis)
    references = [row(wanted.taps, end) for row in PLAIN.values()]
    judge = Judge.of(_flows(basis, alpha), tap_errors(basis), limit, references)
    frame, start = _framed(basis, wanted, end, judge, iterations)
    tau = searched(judge, frame, start, wanted.smallest_spacing, iterations, progress)
    contour = basis.assembled.contour
    return apart(contour, arc_length(contour, tau), frame.at, wanted.smallest_spacing), judge


def require_layout(basis: Basis) -> Layout:
    """The layout asked for; refuses one that cannot be."""
    wanted = basis.campaign.plan.layout
    assert wanted is not None
    if basis.campaign.plan.forecast is None:
        raise QuestionError("layout: needs a [forecast] to place taps for; got none; add one")
    fewest = max(FEWEST, len(set(wanted.fixed)) + 4)
    if wanted.taps < fewest:
        raise QuestionError(f"layout.taps: must be at least {fewest} here; got {wanted.taps}; write more")
    return wanted


def root_spaced(count: int, end: tuple[float, float]) -> Array:
    """τ (n,) of a √x layout between the rear taps ``end`` (τ of the lower and upper one)."""
    return _signed(np.linspace(-1.0, 1.0, count), end)


def cosine_spaced(count: int, end: tuple[float, float]) -> Array:
    """τ (n,) of a cosine layout."""
    return _signed(np.sin(0.5 * np.pi * np.linspace(-1.0, 1.0, count)), end)


PLAIN: dict[str, Callable[[int, tuple[float, float]], Array]] = {
    "root": root_spaced,
    "cosine": cosine_spaced,
}


def _signed(part: Array, end: tuple[float, float]) -> Array:
    return np.where(part < 0.0, -end[0], end[1]) * part


def apart(contour: Contour, s: Array, anchor: Indices, spacing: float) -> Array:
    """Arc lengths (n,) with no two neighbours nearer than ``spacing`` in a straight line; anchors stay."""
    wanted = spacing
    for _ in range(60):
        moved = s.copy()
        for a, b in pairwise(anchor.tolist()):
            steps = np.arange(b - a + 1) * wanted
            if s[b] - s[a] < steps[-1]:
                raise QuestionError(
                    f"layout.smallest_spacing: must leave room for {b - a - 1} taps between two that are taken, "
                    f"{s[b] - s[a]:.4g} chords apart; got {spacing:.4g} chords; lower it, or take fewer taps"
                )
            part = np.clip(s[a : b + 1], s[a] + steps, s[b] - steps[::-1])
            for i in range(1, part.size):
                part[i] = max(part[i], part[i - 1] + wanted)
            for i in range(part.size - 2, -1, -1):
                part[i] = min(part[i], part[i + 1] - wanted)
            moved[a : b + 1] = part
        moved[anchor] = s[anchor]
        x, y = contour.point(moved)
        if np.min(np.hypot(np.diff(x), np.diff(y))) >= spacing * (1.0 - 1e-12):
            return moved
        wanted *= 1.002
    return moved


def _limits(basis: Basis) -> tuple[Array, Array]:
    """Limits (A, 5) of cn, ct, cm, cl, cd_pressure at angles (A,) [rad] over the range planned for."""
    points, demands = basis.raw, basis.demands
    asked = points.alpha[np.unique(demands.point)]
    alpha = np.unique(np.append(np.linspace(asked.min(), asked.max(), ANGLES), asked))
    limit = np.full((alpha.size, 5), np.inf)
    for t in np.unique(demands.target):
        mine = demands.target == t
        low, high = points.alpha[demands.point[mine]].min(), points.alpha[demands.point[mine]].max()
        inside = (alpha >= low - 1e-9) & (alpha <= high + 1e-9)
        j, value = demands.output[mine][0], demands.limit[mine][0]
        limit[inside, j] = np.minimum(limit[inside, j], value)
    return limit, alpha


def _flows(basis: Basis, alpha: Array) -> list[TapFlow]:
    """The section's own flows, then those of the family."""
    section, reduction = basis.campaign.section, basis.campaign.reduction
    own = basis.assembled.contour
    thick = thickness_of(section.x, section.y)
    others = [varied(section.x, section.y, t / thick, c) for t, c in FAMILY] if thick > 0.02 else []
    edge = reduction.trailing_edge
    return [
        tap_flow(
            contour,
            alpha,
            moment_centre=section.moment_centre,
            full_arm=section.full_arm,
            linear=reduction.integration != "contour-cubic",
            closure=float(edge.cp) if isinstance(edge, Closure) else edge,
        )
        for contour in [own, *others]
    ]


def _fixed(basis: Basis) -> list[tuple[str, float]]:
    """Fixed taps: name and arc length [chords]."""
    wanted, names = require_layout(basis), basis.campaign.taps.names
    return [(name, float(basis.assembled.s[names.index(name)])) for name in wanted.fixed]


def _end(basis: Basis) -> tuple[float, float]:
    """τ of the rear taps of the lower and upper surface; a fixed tap further aft takes the place."""
    contour, wanted = basis.assembled.contour, require_layout(basis)
    found = []
    for sign in (-1.0, 1.0):
        far = contour.s_upper if sign > 0.0 else contour.s_lower
        nose, edge = float(contour.x_of(0.0)), float(contour.x_of(far))
        share = min(1.0, (wanted.rearmost - nose) / (edge - nose))
        taken = [abs(float(tau_of(contour, np.array([s]))[0])) for _, s in _fixed(basis) if s * sign > 0.0]
        found.append(sign * max([float(np.sqrt(share)), *taken]))
    return found[0], found[1]


def _framed(
    basis: Basis, wanted: Layout, end: tuple[float, float], judge: Judge, iterations: int
) -> tuple[Frame, Array]:
    """What may not move, and a start; how many taps go on either side of fixed ones is tried out."""
    contour = basis.assembled.contour
    places = sorted({float(tau_of(contour, np.array([s]))[0]) for _, s in _fixed(basis)} - set(end))
    inner = [p for p in places if end[0] < p < end[1]]
    anchor = np.array([end[0], *inner, end[1]])
    start = root_spaced(wanted.taps, end)
    best: tuple[float, Frame, Array] | None = None
    for shift in (0, -1, 1, -2, 2) if inner else (0,):
        at = _positions(start, inner, shift)
        if at is None:
            continue
        frame = Frame(count=wanted.taps, anchor=anchor, at=at)
        tau = frame.places(frame.spacings(start))
        if inner:
            tau = searched(judge, frame, tau, wanted.smallest_spacing, min(FIRST_LOOK, iterations))
        score = judge.score(tau)
        if best is None or score < best[0]:
            best = (score, frame, tau)
    assert best is not None
    return best[1], best[2]


def _positions(start: Array, inner: list[float], shift: int) -> Indices | None:
    """Places in the order of the taps that taken ones have, moved by ``shift``; None where they do not fit."""
    at = [0]
    for k, place in enumerate(inner):
        wish = int(np.argmin(np.abs(start - place))) + shift
        at.append(max(at[-1] + 1, min(wish, start.size - 1 - (len(inner) - k))))
    at.append(start.size - 1)
    return np.array(at, dtype=np.int64) if all(b > a for a, b in pairwise(at)) else None


def _judged(basis: Basis, judge: Judge, layouts: Sequence[tuple[str, Array]]) -> tuple[Judged, ...]:
    """Every layout judged; the flow is solved for all their taps at once."""
    expected = expected_at(basis, np.concatenate([s for _, s in layouts]))
    ends = np.cumsum([s.size for _, s in layouts])
    found = []
    for (name, s), cp in zip(layouts, np.split(expected, ends[:-1], axis=1), strict=True):
        error = judge.worst(tau_of(basis.assembled.contour, s))
        found.append(Judged(taps=s.size, layout=name, interval=worst_interval(basis, s, cp), error=error))
    return tuple(found)


def _ladder(
    judge: Judge, wanted: Layout, end: tuple[float, float], found: Array, iterations: int
) -> list[tuple[str, Array]]:
    """Other numbers of taps: found in a few steps from the better of the spread found and √x, and plain ones.

    A number that the smallest spacing leaves no room for is left out.
    """
    contour = judge.flows[0].contour
    part = np.linspace(0.0, 1.0, found.size)
    result: list[tuple[str, Array]] = []
    for count in sorted({max(FEWEST, round(k * wanted.taps)) for k in LADDER} - {wanted.taps}):
        plain = {name: row(count, end) for name, row in PLAIN.items()}
        starts = [np.interp(np.linspace(0.0, 1.0, count), part, found), plain["root"]]
        start = min(starts, key=judge.score)
        frame = Frame(count=count, anchor=np.array(end), at=np.array([0, count - 1]))
        tau = searched(judge, frame, start, wanted.smallest_spacing, iterations) if iterations else start
        s = arc_length(contour, tau)
        if s[-1] - s[0] > 1.05 * count * wanted.smallest_spacing:
            result.append(("found", apart(contour, s, frame.at, wanted.smallest_spacing)))
        result += [(name, arc_length(contour, row)) for name, row in plain.items()]
    return result
