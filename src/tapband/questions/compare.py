"""The difference of two points, runs or configs, with what they share cancelled.

Runs and configs are brought to equal angles first (:mod:`tapband.questions.pairing`). A difference is that of
the sections as tested, at the angles they truly had, which a pair within the tolerance may not quite share.
``equal_angle`` is the same difference at one true angle: the second side is moved there by its local slope,
and the errors of both angles count, so that a shared one cancels and one of its own does not. Where one side
is interpolated its angles are part of the value, and the two are the same.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import degrees, isfinite

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.errors import QuestionError
from tapband.questions.combine import Combination, spread
from tapband.questions.latents import Latents
from tapband.questions.pairing import (
    SAME_MACH,
    Node,
    Pair,
    Slope,
    nodes_of,
    pairs_of,
    single_nodes,
    slope_at,
)
from tapband.questions.sides import Side, two_sides

Array = NDArray[np.float64]
INTERPOLATION = "interpolation between angles"
ROUNDING = 1e-12
"""A difference smaller than this is none."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Differences:
    """R differences ``a`` minus ``b`` of m coefficients each; arrays (R, m) unless stated."""

    kind: str
    a: tuple[str, ...]
    b: tuple[str, ...]
    outputs: tuple[str, ...]
    sources: tuple[str, ...]
    """Those of the campaign, then the term that interpolation adds."""
    alpha: Array
    """(R, 2) angles of the two sides [rad]."""
    mach: Array
    """(R, 2)."""
    value: Array
    u: Array
    dof: Array
    k: Array
    U: Array
    u_independent: Array
    """If errors were called independent between points."""
    variance: Array
    """(R, m, S) by source."""
    equal_angle_value: Array
    """The difference at one true angle, NaN where no local slope is known."""
    equal_angle_u: Array
    equal_angle_expanded: Array
    interpolated: NDArray[np.bool_]
    """(R,)."""
    notes: tuple[str, ...]
    combination: Combination
    added: Array
    """(R, m) variance of interpolation."""

    @property
    def low(self) -> Array:
        """Lower end of the interval."""
        return self.value - self.U

    @property
    def high(self) -> Array:
        """Upper end of the interval."""
        return self.value + self.U


def compare(latents: Latents, a: str, b: str, *, within: float, level: float) -> Differences:
    """Every difference between two sides; ``within`` [rad] is what counts as one angle."""
    if not (isfinite(within) and within >= 0.0):
        raise QuestionError(
            "compare: the tolerance of angles must be zero or more; "
            f'got {degrees(within):g} deg; write "0.1 deg"'
        )
    first, second = two_sides(latents, a, b)
    if first.kind == "point":
        return _points(latents, first, second, level)
    return _curves(latents, first, second, within, level)


def _points(latents: Latents, first: Side, second: Side, level: float) -> Differences:
    one, other = (single_nodes(latents, side)[0] for side in (first, second))
    pair = Pair(first=one, nodes=(other,), weights=np.ones(1), lower=(), apart=0.0)
    rows = _Rows(pairs=[pair], slopes=[(None, [None])], name=second.name)
    return _differences(latents, "point", rows, level, _said_of_points(one, other))


def _curves(latents: Latents, first: Side, second: Side, within: float, level: float) -> Differences:
    """Runs pair their points one by one; configs pool their repeats first."""
    notes: list[str] = []
    rows = _Rows(pairs=[], slopes=[], name=second.name)
    for one, other in _alike(latents, first, second, notes):
        lines = [nodes_of(latents, side, within) for side in (one, other)]
        pooled = first.kind == "config"
        mine, theirs = lines if pooled else (single_nodes(latents, side) for side in (one, other))
        found, left = pairs_of(mine, theirs, lines[1], within)
        for pair in found:
            rows.pairs.append(pair)
            own = slope_at(lines[0], pair.first)
            others = [slope_at(lines[1], node) or own for node in pair.nodes]
            # A side of one angle has no slope of its own; the other's stands in.
            rows.slopes.append((own or others[0], others))
        if left:
            angles = ", ".join(f"{degrees(node.alpha):.2f}" for node in left)
            notes.append(f"{second.name} holds no angle around {angles} deg; not compared there")
    if not rows.pairs:
        raise QuestionError(
            f"compare: the two sides must reach common angles; got none within {degrees(within):g} deg, nor "
            f'between angles of "{second.name}"; widen the tolerance, or compare points'
        )
    notes += _said_of_pairs(rows.pairs, first, second)
    return _differences(latents, first.kind, rows, level, notes)


def _values(latents: Latents, nodes: Sequence[Node]) -> Array:
    """Mean coefficients (N, m) of nodes."""
    return np.stack([latents.estimate[list(node.points)].mean(axis=0) for node in nodes])


def _alike(latents: Latents, first: Side, second: Side, notes: list[str]) -> list[tuple[Side, Side]]:
    """The two sides, a config at a time where runs hold several; those that one run lacks are left out."""
    held = [tuple(dict.fromkeys(latents.configs[i] for i in side.points)) for side in (first, second)]
    if first.kind == "config" or len(held[0]) == len(held[1]) == 1:
        return [(first, second)]
    common = [config for config in held[0] if config in held[1]]
    names = [", ".join(config or "(none)" for config in configs) for configs in held]
    if not common:
        raise QuestionError(
            "compare: two runs must hold one config each, or some in common; "
            f'got "{first.name}" with {names[0]} and "{second.name}" with {names[1]}; compare configs'
        )
    if set(held[0]) != set(held[1]):
        notes.append(f"only config {', '.join(common)} is in both runs; the others are not compared")
    return [(_of_config(latents, first, config), _of_config(latents, second, config)) for config in common]


def _of_config(latents: Latents, side: Side, config: str) -> Side:
    return replace(side, points=tuple(i for i in side.points if latents.configs[i] == config))


@dataclass(frozen=True, slots=True, kw_only=True)
class _Rows:
    """Pairs, and for each the local slopes of its first node and of its other nodes, where known."""

    pairs: list[Pair]
    slopes: list[tuple[Slope | None, list[Slope | None]]]
    name: str

    def second_label(self, pair: Pair, keys: Sequence[str]) -> str:
        if pair.interpolated:
            return f"{self.name} at {degrees(pair.first.alpha):.3f} deg, interpolated"
        return "+".join(keys[i] for i in pair.nodes[0].points)


class _Terms:
    """Terms of a combination while they are gathered."""

    def __init__(self, latents: Latents) -> None:
        self._latents = latents
        self._parts: list[tuple[int, int, Array, Array]] = []

    def add(self, row: int, node: Node, weight: Array | float, slope: Array | float) -> None:
        """``weight`` () or (m,) times a node, its angle errors moved along ``slope`` () or (m,)."""
        share = np.broadcast_to(weight, (len(self._latents.outputs),)) / len(node.points)
        self._parts += [(row, p, share, -slope * share) for p in node.points]

    def combination(self, rows: int) -> Combination:
        row, point, share, moved = (np.array(column) for column in zip(*self._parts, strict=True))
        weight = share[:, :, None] * np.eye(share.shape[1])
        return Combination(rows=rows, row=row, point=point, weight=weight, on_alpha=moved)


def _combination(latents: Latents, rows: _Rows, at_equal_angle: NDArray[np.bool_]) -> Combination:
    """The differences; rows marked are asked at one true angle, NaN where a slope is not known."""
    terms = _Terms(latents)
    # What is at the stated condition stands at its nominal angle already.
    free = np.array([not name.endswith("_stated") for name in latents.outputs])
    for r, (pair, (mine, theirs)) in enumerate(zip(rows.pairs, rows.slopes, strict=True)):
        along = at_equal_angle[r]
        terms.add(r, pair.first, 1.0, np.where(free, _rate(latents, mine), 0.0) if along else 0.0)
        for node, weight, slope in zip(pair.nodes, pair.weights, theirs, strict=True):
            terms.add(r, node, -float(weight), np.where(free, _rate(latents, slope), 0.0) if along else 0.0)
        if along and pair.apart != 0.0 and theirs[0] is not None:
            for node, weight in zip(theirs[0].nodes, theirs[0].weights, strict=True):
                terms.add(r, node, pair.apart * float(weight) * free, 0.0)
    return terms.combination(len(rows.pairs))


def _rate(latents: Latents, slope: Slope | None) -> Array | float:
    return np.nan if slope is None else np.asarray(slope.weights @ _values(latents, slope.nodes))


def _differences(latents: Latents, kind: str, rows: _Rows, level: float, notes: Sequence[str]) -> Differences:
    pairs = rows.pairs
    interpolated = np.array([pair.interpolated for pair in pairs])
    combination = _combination(latents, rows, interpolated)
    added = _interpolation(latents, rows)
    found = spread(latents, combination).plus(added)
    moved = _combination(latents, rows, np.ones(len(pairs), dtype=np.bool_))
    equal = spread(latents, moved).plus(added)
    unknown = np.zeros((len(pairs), len(latents.outputs)))
    np.add.at(unknown, moved.row, moved.on_alpha * 0.0)
    k = found.k(level)
    blank = np.where(_void(latents, combination), np.nan, 0.0)
    unknown = unknown + blank
    return Differences(
        kind=kind,
        a=tuple(_label(latents, pair.first) for pair in pairs),
        b=tuple(rows.second_label(pair, latents.keys) for pair in pairs),
        outputs=latents.outputs,
        sources=(*latents.sources, INTERPOLATION),
        alpha=np.array([[pair.first.alpha, _mean(pair, "alpha")] for pair in pairs]),
        mach=np.array([[pair.first.mach, _mean(pair, "mach")] for pair in pairs]),
        value=combination.value(latents) + blank,
        u=found.u + blank,
        dof=found.dof + blank,
        k=k + blank,
        U=k * found.u + blank,
        u_independent=np.sqrt(found.independent) + blank,
        variance=found.variance + blank[:, :, None],
        equal_angle_value=moved.value(latents) + unknown,
        equal_angle_u=equal.u + unknown,
        equal_angle_expanded=equal.k(level) * equal.u + unknown,
        interpolated=interpolated,
        notes=tuple(notes),
        combination=combination,
        added=added,
    )


def _mean(pair: Pair, what: str) -> float:
    return float(np.sum(pair.weights * [getattr(node, what) for node in pair.nodes]))


def _void(latents: Latents, combination: Combination) -> NDArray[np.bool_]:
    """(R, m) differences of which a point has no value."""
    missing = np.zeros((combination.rows, len(latents.outputs)), dtype=np.bool_)
    np.logical_or.at(missing, combination.row, ~np.isfinite(latents.estimate[combination.point]))
    return missing


def _interpolation(latents: Latents, rows: _Rows) -> Array:
    """Variance (R, m) of interpolating, bounded by what leaving out an end node changes."""
    half = np.zeros((len(rows.pairs), len(latents.outputs)))
    for r, pair in enumerate(rows.pairs):
        for lower in pair.lower:
            change = (pair.weights - lower) @ _values(latents, pair.nodes)
            half[r] = np.maximum(half[r], np.abs(change))
    return half**2 / 3.0


def _label(latents: Latents, node: Node) -> str:
    return "+".join(latents.keys[i] for i in node.points)


def _said_of_points(one: Node, other: Node) -> list[str]:
    said = []
    if abs(one.alpha - other.alpha) > 1e-12:
        said.append(f"the angles differ: {degrees(one.alpha):.3f} and {degrees(other.alpha):.3f} deg")
    if abs(one.mach - other.mach) > SAME_MACH:
        said.append(f"the Mach numbers differ: {one.mach:.3f} and {other.mach:.3f}")
    return said


def _said_of_pairs(pairs: Sequence[Pair], first: Side, second: Side) -> list[str]:
    said = []
    apart = max(abs(_mean(pair, "mach") - pair.first.mach) for pair in pairs)
    if apart > SAME_MACH:
        said.append(f"{first.name} and {second.name} differ by up to {apart:.3f} in Mach number")
    count = sum(pair.interpolated for pair in pairs)
    if count:
        said.append(f"{count} of {len(pairs)} angles are interpolated between those of {second.name}")
    if any(pair.interpolated and not pair.lower for pair in pairs):
        said.append("two angles alone bound no error of interpolation; none is in the interval there")
    return said
