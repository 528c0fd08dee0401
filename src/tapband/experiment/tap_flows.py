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

from tapband.experiment.contour import Contour
from tapband.experiment.inviscid import flow_round
from tapband.experiment.quadrature import AT_EDGE

Array = NDArray[np.float64]

PANELS = 120
GAUSS = 3
FINE = 401


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

    def weights(self, s: Array) -> tuple[Array, Array]:
        """(3, n) per unit Cp of taps at rising arc lengths s (n,), closure included, and a constant (3,)."""
        nodes, to_nodes, constant = self._nodes(s)
        by_node = self._by_node(nodes, self.linear)
        return np.asarray(by_node @ to_nodes), np.asarray(by_node @ constant)

    def spacing(self, s: Array, cp: Array) -> Array:
        """(3, A, 3) half-widths of finite tap spacing at Cp (A, n); see ``bounds.spacing_half_widths``."""
        nodes, to_nodes, constant = self._nodes(s)
        value = cp @ to_nodes.T + constant
        chosen = value @ self._by_node(nodes, self.linear).T
        found = [chosen - value @ self._by_node(nodes, not self.linear).T]
        ahead = int(np.flatnonzero(nodes == s[0])[0])
        for half in (0, 1):
            kept = set(range(ahead + half, ahead + s.size, 2)) | {ahead, ahead + s.size - 1}
            kept |= set(range(ahead)) | set(range(ahead + s.size, nodes.size))
            some = np.array(sorted(kept))
            found.append((chosen - value[:, some] @ self._by_node(nodes[some], self.linear).T) / 3.0)
        return np.stack(found)

    def _by_node(self, nodes: Array, linear: bool) -> Array:
        basis = _hats(nodes, self.at) if linear else CubicSpline(nodes, np.eye(nodes.size))(self.at)
        return np.asarray(self.by_cp @ basis)

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


def _hats(nodes: Array, at: Array) -> Array:
    """(K, N) values of the piecewise linear cardinal functions."""
    left = np.clip(np.searchsorted(nodes, at, side="right") - 1, 0, nodes.size - 2)
    t = (at - nodes[left]) / (nodes[left + 1] - nodes[left])
    basis = np.zeros((at.size, nodes.size))
    rows = np.arange(at.size)
    basis[rows, left], basis[rows, left + 1] = 1.0 - t, t
    return basis
