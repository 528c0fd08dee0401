"""Points of two runs or configs brought to equal angles: paired as they stand, or interpolated.

A node is what one side holds at one angle and Mach number: a point, or the mean of repeats.

*Source* of the weights: Lagrange's interpolation formula, through the four nearest nodes at most.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.questions.latents import Latents
from tapband.questions.sides import Side

Array = NDArray[np.float64]
SAME_MACH = 0.005
"""Mach numbers closer than this count as one."""
STENCIL = 4
"""Nodes an interpolation uses at most."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Node:
    """Points (k,) of one angle and Mach number; alpha [rad] and mach are their means."""

    points: tuple[int, ...]
    alpha: float
    mach: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Pair:
    """A node of the first side, and what stands against it on the second.

    The second is Σ weight · node. ``lower`` holds weights of one order less, for the error of interpolation;
    ``apart`` [rad] is how far a pair of nodes, taken as they stand, differ in angle.
    """

    first: Node
    nodes: tuple[Node, ...]
    weights: Array
    lower: tuple[Array, ...]
    apart: float

    @property
    def interpolated(self) -> bool:
        """Whether the second side has no node at this angle."""
        return len(self.nodes) > 1


def nodes_of(latents: Latents, side: Side, within: float) -> tuple[Node, ...]:
    """The nodes of a side in order of angle; points that lie within ``within`` [rad] are repeats."""
    order = sorted(side.points, key=lambda i: (latents.alpha[i], latents.mach[i]))
    clusters: list[list[int]] = []
    for i in order:
        for cluster in reversed(clusters):
            near = latents.alpha[i] - latents.alpha[cluster[0]] <= within
            if near and abs(latents.mach[i] - latents.mach[cluster[0]]) <= SAME_MACH:
                cluster.append(i)
                break
            if not near:
                clusters.append([i])
                break
        else:
            clusters.append([i])
    return tuple(
        Node(
            points=tuple(cluster),
            alpha=float(np.mean(latents.alpha[cluster])),
            mach=float(np.mean(latents.mach[cluster])),
        )
        for cluster in clusters
    )


def single_nodes(latents: Latents, side: Side) -> tuple[Node, ...]:
    """Every point of a side as a node of its own, in order of angle."""
    order = sorted(side.points, key=lambda i: (latents.alpha[i], latents.mach[i]))
    return tuple(Node(points=(i,), alpha=float(latents.alpha[i]), mach=float(latents.mach[i])) for i in order)


def pairs_of(
    first: Sequence[Node], second: Sequence[Node], line: Sequence[Node], within: float
) -> tuple[list[Pair], list[Node]]:
    """A pair for each node of the first side, and the nodes that the second side's angles do not reach.

    ``line`` is the second side with repeats pooled, to interpolate in.
    """
    partner = _partners(first, second, within)
    pairs, left = [], []
    for node, other in zip(first, partner, strict=True):
        pair = _as_they_stand(node, other) if other is not None else _interpolated(node, line)
        if pair is None:
            left.append(node)
        else:
            pairs.append(pair)
    return pairs, left


def _partners(first: Sequence[Node], second: Sequence[Node], within: float) -> list[Node | None]:
    """The nearest node of the second side within the tolerance; each is taken once while others are free.

    Both sides are in order of angle. Nodes of one Mach number go before nodes of two.
    """
    angle, other = (np.array([node.alpha for node in side]) for side in (first, second))
    reach = within * (1.0 + 1e-9)
    low, high = np.searchsorted(other, angle - reach), np.searchsorted(other, angle + reach, side="right")
    rows = np.repeat(np.arange(angle.size), high - low)
    columns = np.arange(rows.size) - np.repeat(np.cumsum(high - low) - (high - low), high - low)
    columns += np.repeat(low, high - low)
    mach, mach_other = (np.array([node.mach for node in side]) for side in (first, second))
    apart = np.abs(mach[rows] - mach_other[columns])
    cost = np.abs(angle[rows] - other[columns]) + (apart > SAME_MACH) * (1.0 + apart)
    order = np.argsort(cost, kind="stable")
    found: list[Node | None] = [None] * len(first)
    used: set[int] = set()
    for again in (False, True):
        for i, j in zip(rows[order].tolist(), columns[order].tolist(), strict=True):
            if found[i] is None and (again or j not in used):
                found[i] = second[j]
                used.add(j)
    return found


def _as_they_stand(node: Node, other: Node) -> Pair:
    return Pair(first=node, nodes=(other,), weights=np.ones(1), lower=(), apart=other.alpha - node.alpha)


def _interpolated(node: Node, second: Sequence[Node]) -> Pair | None:
    alike = [other for other in second if abs(other.mach - node.mach) <= SAME_MACH]
    line = alike if len(alike) > 1 else list(second)
    alpha = np.array([other.alpha for other in line])
    if np.any(np.diff(alpha) <= 0.0):  # several Mach numbers at one angle: there is no one curve
        return None
    above = int(np.searchsorted(alpha, node.alpha))
    if above == 0 or above == len(line):
        return None
    start = min(max(above - STENCIL // 2, 0), max(len(line) - STENCIL, 0))
    chosen = slice(start, min(start + STENCIL, len(line)))
    angles = alpha[chosen]
    lower = []
    if angles.size > 2:
        for left_out in (0, angles.size - 1):
            kept = np.arange(angles.size) != left_out
            if angles[kept][0] <= node.alpha <= angles[kept][-1]:
                weights = np.zeros(angles.size)
                weights[kept] = lagrange(angles[kept], node.alpha)
                lower.append(weights)
    return Pair(
        first=node,
        nodes=tuple(line[chosen]),
        weights=lagrange(angles, node.alpha),
        lower=tuple(lower),
        apart=0.0,
    )


def lagrange(x: Array, at: float) -> Array:
    """Weights (n,) that give the value at ``at`` of the polynomial through n nodes."""
    weights = np.ones(x.size)
    for i in range(x.size):
        others = np.delete(x, i)
        weights[i] = np.prod((at - others) / (x[i] - others))
    return weights


@dataclass(frozen=True, slots=True, kw_only=True)
class Slope:
    """∂y/∂alpha [per rad] at one angle as Σ weight · node."""

    nodes: tuple[Node, ...]
    weights: Array


def slope_at(line: Sequence[Node], node: Node) -> Slope | None:
    """The local slope at a node's angle, from a side's pooled nodes at the node's Mach number.

    Of the parabola through the three nearest, of the line through two; None where there is one alone.
    """
    alike = [other for other in line if abs(other.mach - node.mach) <= SAME_MACH]
    if len(alike) < 2:
        return None
    chosen, weights = slope_weights(np.array([other.alpha for other in alike]), node.alpha)
    return Slope(nodes=tuple(alike[chosen]), weights=weights)


def slope_weights(x: Array, at: float) -> tuple[slice, Array]:
    """Which of the ordered nodes x (n,) ≥ 2 give the local slope at ``at``, and their weights.

    The derivative of the parabola through the three nearest nodes, of the line through two.
    """
    size = min(3, x.size)
    start = int(np.clip(np.searchsorted(x, at) - 1, 0, x.size - size))
    if size == 3 and start > 0 and abs(x[start - 1] - at) < abs(x[start + 2] - at):
        start -= 1
    chosen = slice(start, start + size)
    near = x[chosen]
    if size == 2:
        return chosen, np.array([-1.0, 1.0]) / (near[1] - near[0])
    weights = np.empty(3)
    for i in range(3):
        j, k = np.delete(near, i)
        weights[i] = (2.0 * at - j - k) / ((near[i] - j) * (near[i] - k))
    return chosen, weights
