"""Fixed weights that turn tap coefficients into cn, ct and the moment about x = 0.

For a set of live taps everything here is linear in the tap coefficients, so it is computed once for that set.
Dead taps keep their place with zero weight.

    cn = −∮ Cp dx,   ct = ∮ Cp dy,   cm₀ = ∮ Cp (x dx + y dy)     (lower edge → nose → upper edge)

cn is normal to the chord, ct along it towards the trailing edge, cm nose-up.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from tapband.experiment.contour import Contour
from tapband.experiment.rowwise import in_pieces, sum_in_pieces

Array = NDArray[np.float64]
AT_EDGE = 1e-6
"""A tap within this arc length [chords] of the trailing edge is the edge."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Quadrature:
    """Weights of one set of live taps; n taps, dead ones included with zero weight.

    A coefficient vector integrates to ``weights @ cp + constant``. Rows are cn, ct, cm₀.
    """

    live: NDArray[np.bool_]
    order: NDArray[np.int64]
    """Live taps from the lower trailing edge round the nose to the upper one (k,)."""
    node_weights: Array
    """(4, 3, N): the rule, then the three finite-spacing differences, on the nodes of the interpolant."""
    nodes_of: Array
    """(N, n): node values from tap coefficients, trailing-edge closure included."""
    nodes_constant: Array
    """(N,): what a stated trailing-edge coefficient adds to the nodes."""
    edge_common: Array
    """(N,): 1 at nodes that the closing value sets."""
    edge_loading: Array
    """(N,): +1 at the upper closing node, −1 at the lower."""
    slope: Array
    """(n, n) with :attr:`slope_constant` (n,): dCp/ds at the taps [1/chord], from the cubic."""
    slope_constant: Array
    curvature: Array
    """(n, n) with :attr:`curvature_constant` (n,): d²Cp/ds² at the taps [1/chord²], from the cubic."""
    curvature_constant: Array
    rear: tuple[int, int]
    """Indices of the rearmost live tap on the upper and on the lower surface."""
    rear_mean: Array
    """(n,): closing value of the rear taps."""
    rear_extrapolated: Array
    """(n,): mean of the two surfaces' linear extrapolations to the edge."""

    @property
    def weights(self) -> Array:
        """(3, n): cn, ct, cm₀ per unit tap coefficient, closure included."""
        return np.asarray(self.node_weights[0] @ self.nodes_of)

    @property
    def constant(self) -> Array:
        """(3,): what a stated trailing-edge coefficient contributes."""
        return np.asarray(self.node_weights[0] @ self.nodes_constant)


def quadrature(
    contour: Contour,
    s: Array,
    live: NDArray[np.bool_],
    *,
    rule: str = "contour-cubic",
    closure: str | float = "rear taps",
    full_arm: bool = True,
    spacing: bool = True,
    edge_correction: float = 0.0,
) -> Quadrature:
    """The weights of one set of live taps.

    ``s`` (n,) arc length of all taps [chords], ``live`` (n,); ``closure`` "rear taps", "extrapolate" or a
    trailing-edge coefficient; ``edge_correction`` is added to the closing value. *Assumes* five live taps or
    more, two at least on each surface.
    """
    order = np.flatnonzero(live)[np.argsort(s[live], kind="stable")]
    edge = _Edge.of(contour, s, order, closure)
    nodes = np.concatenate([edge.lower_s, s[order], edge.upper_s])
    chosen = _rule_weights(contour, nodes, rule, full_arm)
    node_weights = np.zeros((4, 3, nodes.size))
    node_weights[0] = chosen
    if spacing:
        other = "contour-cubic" if rule == "contour-linear" else "contour-linear"
        node_weights[1] = chosen - _rule_weights(contour, nodes, other, full_arm)
        for half in (0, 1):
            kept = _every_second(nodes.size, half, edge)
            thin = np.zeros_like(chosen)
            thin[:, kept] = _rule_weights(contour, nodes[kept], rule, full_arm)
            node_weights[2 + half] = (chosen - thin) / 3.0
    constant = edge.constant + edge_correction * edge.common
    cubic = CubicSpline(nodes, np.eye(nodes.size))
    derivatives = []
    for nu in (1, 2):
        at_taps = np.zeros((s.size, nodes.size))
        at_taps[order] = cubic(s[order], nu)
        derivatives.append(at_taps)
    return Quadrature(
        live=live,
        order=order,
        node_weights=node_weights,
        nodes_of=edge.nodes_of,
        nodes_constant=constant,
        edge_common=edge.common,
        edge_loading=edge.loading,
        slope=in_pieces(derivatives[0], edge.nodes_of),
        slope_constant=derivatives[0] @ constant,
        curvature=in_pieces(derivatives[1], edge.nodes_of),
        curvature_constant=derivatives[1] @ constant,
        rear=edge.rear,
        rear_mean=edge.rear_mean,
        rear_extrapolated=edge.rear_extrapolated,
    )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Edge:
    """How the interpolant is closed at the trailing edge."""

    lower_s: Array
    upper_s: Array
    nodes_of: Array
    constant: Array
    common: Array
    loading: Array
    rear: tuple[int, int]
    rear_mean: Array
    rear_extrapolated: Array

    @classmethod
    def of(cls, contour: Contour, s: Array, order: NDArray[np.int64], closure: str | float) -> _Edge:
        lower, upper = order[0], order[-1]
        mean = _unit(s.size, {int(lower): 0.5, int(upper): 0.5})
        beyond = 0.5 * (
            _extrapolation(s, order[0], order[1], contour.s_lower)
            + _extrapolation(s, order[-1], order[-2], contour.s_upper)
        )
        stated = isinstance(closure, float)
        value = np.zeros(s.size) if stated else beyond if closure == "extrapolate" else mean
        gap = [s[lower] - contour.s_lower > AT_EDGE, contour.s_upper - s[upper] > AT_EDGE]
        size = order.size + sum(gap)
        nodes_of, constant = np.zeros((size, s.size)), np.zeros(size)
        common, loading = np.zeros(size), np.zeros(size)
        nodes_of[np.arange(order.size) + int(gap[0]), order] = 1.0
        for row, sign, open_end in ((0, -1.0, gap[0]), (size - 1, 1.0, gap[1])):
            if open_end:
                nodes_of[row], common[row], loading[row] = value, 1.0, sign
                constant[row] = closure if stated else 0.0
        return cls(
            lower_s=np.array([contour.s_lower][: int(gap[0])]),
            upper_s=np.array([contour.s_upper][: int(gap[1])]),
            nodes_of=nodes_of,
            constant=constant,
            common=common,
            loading=loading,
            rear=(int(upper), int(lower)),
            rear_mean=mean,
            rear_extrapolated=beyond,
        )


def _unit(size: int, entries: dict[int, float]) -> Array:
    vector = np.zeros(size)
    for index, value in entries.items():
        vector[index] += value
    return vector


def _extrapolation(s: Array, last: int, before: int, edge: float) -> Array:
    """Weights (n,) of the line through the last two taps of a surface, at the trailing edge."""
    t = (edge - s[last]) / (s[last] - s[before])
    return _unit(s.size, {int(last): 1.0 + t, int(before): -t})


def _every_second(size: int, half: int, edge: _Edge) -> NDArray[np.int64]:
    """Nodes of one interleaved half of the taps; closing nodes and rear taps are kept in both."""
    first, last = edge.lower_s.size, size - edge.upper_s.size
    taps = set(range(first + half, last, 2)) | {first, last - 1}
    return np.array(sorted(taps | set(range(first)) | set(range(last, size))), dtype=np.int64)


def _rule_weights(contour: Contour, nodes: Array, rule: str, full_arm: bool) -> Array:
    """(3, N) weights of cn, ct, cm₀ for an interpolant through N nodes, base of a blunt edge included."""
    if rule == "polygon":
        path = np.column_stack(contour.point(nodes))
        weights = _polyline(path, np.eye(nodes.size), full_arm)
    else:
        weights = _along_contour(contour, nodes, rule, full_arm)
    share = _base_shares(contour.base)[:, None]
    ends = np.zeros((share.size, nodes.size))
    ends[:, -1:] += 1.0 - share
    ends[:, :1] += share
    return weights + _polyline(contour.base, ends, full_arm)


def _along_contour(contour: Contour, nodes: Array, rule: str, full_arm: bool) -> Array:
    """∮ of the interpolant on the spline contour: exact, five Gauss points hold degree nine."""
    breaks = np.union1d(contour.knots, nodes)
    breaks = breaks[np.append(True, np.diff(breaks) > 1e-14)]
    gauss, gauss_weights = np.polynomial.legendre.leggauss(5)
    half = 0.5 * np.diff(breaks)
    at = (0.5 * (breaks[:-1] + breaks[1:])[:, None] + half[:, None] * gauss).ravel()
    w = (half[:, None] * gauss_weights).ravel()
    basis = CubicSpline(nodes, np.eye(nodes.size))(at) if rule == "contour-cubic" else _hats(nodes, at)
    dx, dy = w * contour.x_of(at, 1), w * contour.y_of(at, 1)
    lever = contour.x_of(at) * dx + (contour.y_of(at) * dy if full_arm else 0.0)
    return sum_in_pieces(np.vstack([-dx, dy, lever]), basis)


def _hats(nodes: Array, at: Array) -> Array:
    """(Q, N) values of the piecewise linear cardinal functions."""
    left = np.clip(np.searchsorted(nodes, at, side="right") - 1, 0, nodes.size - 2)
    t = (at - nodes[left]) / (nodes[left + 1] - nodes[left])
    basis = np.zeros((at.size, nodes.size))
    rows = np.arange(at.size)
    basis[rows, left], basis[rows, left + 1] = 1.0 - t, t
    return basis


def _polyline(path: Array, values: Array, full_arm: bool) -> Array:
    """∮ along straight pieces with Cp linear on each; ``values`` (B, N) maps nodes to corner values."""
    x, y = path.T
    dx, dy = np.diff(x), np.diff(y)
    first, second = values[:-1], values[1:]
    mean = 0.5 * (first + second)
    lever_first = ((2 * x[:-1] + x[1:]) * dx + (2 * y[:-1] + y[1:]) * dy * full_arm) / 6.0
    lever_second = ((x[:-1] + 2 * x[1:]) * dx + (y[:-1] + 2 * y[1:]) * dy * full_arm) / 6.0
    return np.vstack([-dx @ mean, dy @ mean, lever_first @ first + lever_second @ second])


def _base_shares(base: Array) -> Array:
    """Path fraction of each corner of the base, 0 at the upper end, 1 at the lower."""
    lengths = np.linalg.norm(np.diff(base, axis=0), axis=1)
    total = lengths.sum()
    return np.append(0.0, np.cumsum(lengths) / total) if total > 0 else np.linspace(0.0, 1.0, len(base))
