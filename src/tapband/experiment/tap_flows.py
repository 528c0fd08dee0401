"""Exact flows to judge a tap layout by: what taps at given places would integrate to, and what is true.

Taps are placed by τ: τ² is the share of the way from nose to trailing edge, along the chord; τ is positive on
the upper surface. Equal steps of τ are a √x layout, τ runs smoothly round the nose, and one layout has a
meaning on every section. The flows are inviscid and held to be exact: truth and readings come from the same
surface speeds, so that a difference is the layout's own. K places on the surface, n taps, A angles.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline
from scipy.linalg import solve_banded

from tapband.experiment.contour import Contour
from tapband.experiment.inviscid import flow_round
from tapband.experiment.quadrature import AT_EDGE

Array = NDArray[np.float64]

PANELS = 120
GAUSS = 3
FINE = 401


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class TapWeights:
    """Weights of taps (4, 3, n) and a constant (4, 3): the rule, then the three half-widths of finite tap
    spacing (``bounds.spacing_half_widths``); rows of three are cn, ct, cm about the moment centre."""

    by_cp: Array
    constant: Array


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class TapFlow:
    """One section in flows at A angles [rad]; rows of three are cn, ct, cm about the moment centre."""

    contour: Contour
    alpha: Array
    exact: Array
    """(A, 3) cn, ct, cm of the surface pressure, a blunt base left out."""
    by_cp: Array
    """(3, K) per unit Cp at the places ``at`` (K,)."""
    at: Array
    s_of: CubicSpline
    """Arc length [chords] of τ."""
    speed: CubicSpline
    """Surface speed (A,) by arc length."""
    linear: bool
    """Whether the interpolant is linear between taps instead of cubic."""
    closure: str | float

    def cp(self, s: Array) -> Array:
        """Cp (A, n) at arc lengths s (n,)."""
        return np.asarray(1.0 - self.speed(s) ** 2)

    def slope(self, s: Array) -> Array:
        """dCp/ds (A, n) [1/chord]."""
        return np.asarray(-2.0 * self.speed(s) * self.speed(s, 1))

    def weights(self, s: Array) -> TapWeights:
        """What taps at rising arc lengths s (n,) integrate to, closure included."""
        nodes, to_nodes, constant = self._nodes(s)
        chosen = self._by_node(nodes, self.linear)
        rows = [chosen, chosen - self._by_node(nodes, not self.linear)]
        ahead = int(nodes[0] != s[0])
        for half in (0, 1):
            kept = np.ones(nodes.size, dtype=np.bool_)
            kept[ahead + 1 - half : ahead + s.size - 1 : 2] = False
            kept[[ahead, ahead + s.size - 1]] = True
            thin = np.zeros_like(chosen)
            thin[:, kept] = self._by_node(nodes[kept], self.linear)
            rows.append((chosen - thin) / 3.0)
        by_node = np.stack(rows)
        return TapWeights(by_cp=by_node @ to_nodes, constant=by_node @ constant)

    def _by_node(self, nodes: Array, linear: bool) -> Array:
        """(3, N) weights of an interpolant through nodes (N,)."""
        return interpolant_weights(nodes, self.at, self.by_cp, linear=linear)

    def _nodes(self, s: Array) -> tuple[Array, Array, Array]:
        """Nodes (N,), their values by tap (N, n), and what a stated closing value adds to them (N,)."""
        ends = (self.contour.s_lower, self.contour.s_upper)
        low, high = bool(s[0] - ends[0] > AT_EDGE), bool(ends[1] - s[-1] > AT_EDGE)
        nodes = np.concatenate([[ends[0]] if low else [], s, [ends[1]] if high else []])
        to_nodes, constant = np.zeros((nodes.size, s.size)), np.zeros(nodes.size)
        to_nodes[int(low) + np.arange(s.size), np.arange(s.size)] = 1.0
        for row, open_end in ((0, low), (nodes.size - 1, high)):
            if open_end and isinstance(self.closure, float):
                constant[row] = self.closure
            elif open_end:
                to_nodes[row] = self._closing(s)
        return nodes, to_nodes, constant

    def _closing(self, s: Array) -> Array:
        """(n,) the closing value from the taps."""
        row = np.zeros(s.size)
        row[[0, -1]] = 0.5
        if self.closure == "extrapolate":
            for end, last, before in ((self.contour.s_lower, 0, 1), (self.contour.s_upper, -1, -2)):
                t = (end - s[last]) / (s[last] - s[before])
                row[last] += 0.5 * t
                row[before] -= 0.5 * t
        return row


def tap_flow(
    contour: Contour,
    alpha: Array,
    *,
    moment_centre: float = 0.25,
    full_arm: bool = True,
    linear: bool = False,
    closure: str | float = "rear taps",
) -> TapFlow:
    """The flows round a contour at A angles [rad], integrated as the options say."""
    flow = flow_round(contour, alpha, PANELS)
    node, weight = np.polynomial.legendre.leggauss(GAUSS)
    half, middle = 0.5 * np.diff(flow.s), 0.5 * (flow.s[1:] + flow.s[:-1])
    at = (middle[:, None] + half[:, None] * node).ravel()
    ds = (half[:, None] * weight).ravel()
    x, y = contour.point(at)
    dx, dy = contour.x_of(at, 1) * ds, contour.y_of(at, 1) * ds
    by_cp = np.vstack([-dx, dy, (x - moment_centre) * dx + (y * dy if full_arm else 0.0)])
    speed = CubicSpline(flow.s, flow.speed, axis=1)
    tau = np.linspace(-1.0, 1.0, 2 * FINE + 1)
    s = arc_length(contour, tau)
    return TapFlow(
        contour=contour,
        alpha=flow.alpha,
        exact=(1.0 - speed(at) ** 2) @ by_cp.T,
        by_cp=by_cp,
        at=at,
        s_of=CubicSpline(tau, s),
        speed=speed,
        linear=linear,
        closure=closure,
    )


def arc_length(contour: Contour, tau: Array) -> Array:
    """Arc length (n,) [chords] of places τ (n,) between −1 and 1."""
    nose = float(contour.x_of(0.0))
    upper = tau > 0.0
    ends = contour.x_of(np.where(upper, contour.s_upper, contour.s_lower))
    s = contour.place_x(nose + tau**2 * (ends - nose), upper)
    return np.where(tau == 0.0, 0.0, np.nan_to_num(s))


def tau_of(contour: Contour, s: Array) -> Array:
    """τ (n,) of places at arc lengths s (n,) [chords]."""
    nose = float(contour.x_of(0.0))
    ends = contour.x_of(np.where(s > 0.0, contour.s_upper, contour.s_lower))
    share = np.clip((contour.x_of(s) - nose) / (ends - nose), 0.0, 1.0)
    return np.sign(s) * np.sqrt(share)


def varied(x: Array, y: Array, thickness: float, camber: float) -> Contour:
    """The contour through (x, y) with its ordinates times ``thickness`` and more camber [chords], aft of 0.3.

    The camber is 4 x (1 − x) from there on and fades towards the nose, which keeps its shape.
    """
    return Contour.of(x, thickness * y + 4.0 * camber * x * (1.0 - x) * np.clip(x / 0.3, 0.0, 1.0))


def thickness_of(x: Array, y: Array) -> float:
    """Extent across the chord [chords], which is the thickness of a section without much camber."""
    contour = Contour.of(x, y)
    place = np.linspace(0.02, 0.9, 60)
    upper = contour.y_of(contour.place_x(place, np.ones(60, dtype=np.bool_)))
    lower = contour.y_of(contour.place_x(place, np.zeros(60, dtype=np.bool_)))
    return float(np.nanmax(upper - lower))


def interpolant_weights(nodes: Array, at: Array, rows: Array, *, linear: bool = False) -> Array:
    """(m, N) weights on node values of Σ_k rows_k f(at_k), f the interpolant through N ≥ 4 nodes.

    f is piecewise linear, or the cubic spline with not-a-knot ends. The spline's slopes solve A m = R f; the
    weights are solved for with Aᵀ, one right side a row instead of one a node. ``rows`` (m, K) at ``at`` (K,).

    *Source* de Boor, A Practical Guide to Splines (1978), chapter IV.
    """
    left = np.clip(np.searchsorted(nodes, at, side="right") - 1, 0, nodes.size - 2)
    step = np.diff(nodes)
    t = (at - nodes[left]) / step[left]
    if linear:
        return _summed(rows, left, 1.0 - t, t, nodes.size)
    values = _summed(rows, left, (1.0 + 2.0 * t) * (1.0 - t) ** 2, t * t * (3.0 - 2.0 * t), nodes.size)
    h = step[left]
    slopes = _summed(rows, left, h * t * (1.0 - t) ** 2, h * t * t * (t - 1.0), nodes.size)
    transposed, lower, upper = _spline_system(nodes, step)
    moved = solve_banded((1, 1), transposed, slopes.T, check_finite=False).T
    # R f: each equation weighs the divided differences before and after it.
    by_difference = moved[:, :-1] * upper + moved[:, 1:] * lower
    ends = _end_terms(nodes, step)
    by_difference[:, 1] += moved[:, 0] * ends[0]
    by_difference[:, -2] += moved[:, -1] * ends[1]
    by_difference /= step
    values[:, 1:] += by_difference
    values[:, :-1] -= by_difference
    return values


def _summed(rows: Array, left: NDArray[np.int64], near: Array, far: Array, size: int) -> Array:
    """(m, N) sums of rows (m, K) times the two weights of each place on the nodes left and right of it."""
    out = np.empty((len(rows), size))
    for out_row, row in zip(out, rows, strict=True):
        out_row[:] = np.bincount(left, row * near, size)
        out_row[1:] += np.bincount(left, row * far, size)[:-1]
    return out


def _spline_system(nodes: Array, step: Array) -> tuple[Array, Array, Array]:
    """Aᵀ as bands (3, N), and what each divided difference (N − 1,) weighs in the equation at its right and at
    its left node."""
    size = nodes.size
    bands = np.zeros((3, size))  # of the transpose: upper, middle, lower
    bands[1, 1:-1] = 2.0 * (step[:-1] + step[1:])
    bands[1, [0, -1]] = step[1], step[-2]
    below, above = np.append(step[1:], nodes[-1] - nodes[-3]), np.append(nodes[2] - nodes[0], step[:-1])
    bands[0, 1:], bands[2, :-1] = below, above
    lower, upper = np.empty(size - 1), np.empty(size - 1)
    lower[:-1], upper[1:] = 3.0 * step[1:], 3.0 * step[:-1]
    first, last = nodes[2] - nodes[0], nodes[-1] - nodes[-3]
    upper[0] = (step[0] + 2.0 * first) * step[1] / first
    lower[-1] = (step[-1] + 2.0 * last) * step[-2] / last
    return bands, lower, upper


def _end_terms(nodes: Array, step: Array) -> tuple[float, float]:
    """What the second difference from either end weighs in the end's equation."""
    return (
        float(step[0] ** 2 / (nodes[2] - nodes[0])),
        float(step[-1] ** 2 / (nodes[-1] - nodes[-3])),
    )
