"""What the integrals lose with each tap in turn, without computing a rule anew for every tap.

A cubic spline that lacks node i is the whole one whose value at i lets its third derivative pass without a
jump; a piecewise linear one lies on the chord between the neighbours. So leaving a node out replaces its
value by a fixed combination of the others. A polygon loses two sides and gains one.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from tapband.experiment.contour import Contour
from tapband.experiment.quadrature import Quadrature

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LeftOut:
    """Changes of cn, ct, cm₀ when one tap of a live set is left out; N nodes as in the quadrature."""

    taps: Indices
    """(K,) taps whose loss leaves the closing of the trailing edge as it is."""
    change: Array
    """(K, 3, N): added to the weights on the node values."""
    others: Indices
    """Live taps that the closing value is made from, or that end the path: their rule must be made anew."""


def left_out(contour: Contour, s: Array, quadrature: Quadrature, rule: str, full_arm: bool) -> LeftOut:
    """Every live tap left out in turn; ``s`` (n,) arc length of all taps [chords].

    *Assumes* six live taps or more.
    """
    nodes, first = _nodes(contour, s, quadrature)
    closing = np.flatnonzero((quadrature.edge_common != 0.0) | (quadrature.edge_loading != 0.0))
    touched = np.any(quadrature.nodes_of[closing] != 0.0, axis=0)
    place = np.arange(quadrature.order.size) + first
    inside = (place > 0) & (place < nodes.size - 1) & ~touched[quadrature.order]
    dropped = place[inside]
    if rule == "polygon":
        change = _sides(contour, nodes, dropped, full_arm)
    else:
        fold = _cubic(nodes, dropped) if rule == "contour-cubic" else _linear(nodes, dropped)
        change = quadrature.node_weights[0][:, dropped].T[:, :, None] * fold[:, None, :]
    return LeftOut(taps=quadrature.order[inside], change=change, others=quadrature.order[~inside])


def _nodes(contour: Contour, s: Array, quadrature: Quadrature) -> tuple[Array, int]:
    """Arc length (N,) of the nodes, and the node of the first tap."""
    ends = quadrature.edge_loading
    lower = [contour.s_lower] if ends[0] < 0.0 else []
    upper = [contour.s_upper] if ends[-1] > 0.0 else []
    return np.concatenate([lower, s[quadrature.order], upper]), len(lower)


def _cubic(nodes: Array, dropped: Indices) -> Array:
    """(K, N): what a cubic with not-a-knot ends adds to the dropped node's value; −1 at that node.

    Next to an end the spline has no knot; there the loss takes the knot from the node after it.
    """
    third = CubicSpline(nodes, np.eye(nodes.size)).c[0]
    knot = np.clip(dropped, 2, nodes.size - 3)
    jump = third[knot] - third[knot - 1]
    return np.asarray(-jump / np.take_along_axis(jump, dropped[:, None], axis=1))


def _linear(nodes: Array, dropped: Indices) -> Array:
    """(K, N): the chord between the neighbours, less the dropped node's own value."""
    fold = np.zeros((dropped.size, nodes.size))
    rows = np.arange(dropped.size)
    t = (nodes[dropped] - nodes[dropped - 1]) / (nodes[dropped + 1] - nodes[dropped - 1])
    fold[rows, dropped - 1], fold[rows, dropped], fold[rows, dropped + 1] = 1.0 - t, -1.0, t
    return fold


def _sides(contour: Contour, nodes: Array, dropped: Indices, full_arm: bool) -> Array:
    """(K, 3, N): the side between the neighbours less the two sides at the dropped corner."""
    x, y = contour.point(nodes)
    change = np.zeros((dropped.size, 3, nodes.size))
    rows = np.arange(dropped.size)
    for sign, start, end in ((1.0, -1, 1), (-1.0, -1, 0), (-1.0, 0, 1)):
        a, b = dropped + start, dropped + end
        for node, weights in zip((a, b), _side(x[a], y[a], x[b], y[b], full_arm), strict=True):
            change[rows, :, node] += sign * weights.T
    return change


def _side(x1: Array, y1: Array, x2: Array, y2: Array, full_arm: bool) -> tuple[Array, Array]:
    """Weights (3, K) of cn, ct, cm₀ at both ends of straight sides with Cp linear on each."""
    dx, dy, arm = x2 - x1, y2 - y1, float(full_arm)
    first = ((2 * x1 + x2) * dx + arm * (2 * y1 + y2) * dy) / 6.0
    second = ((x1 + 2 * x2) * dx + arm * (y1 + 2 * y2) * dy) / 6.0
    return np.stack([-0.5 * dx, 0.5 * dy, first]), np.stack([-0.5 * dx, 0.5 * dy, second])
