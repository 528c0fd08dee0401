"""Inviscid, incompressible flow round a contour by vortex panels of linearly varying strength.

The stream function is constant along a body's surface, and inside it the fluid of this mathematical body is
at rest, so the vortex strength at the surface *is* the surface speed there. Unknown are the strength at each
node and the constant; the equations say that the stream function takes that constant at each node, and that
the speeds at the two ends of the contour are equal (Kutta's condition). The equations are linear in cos α
and sin α: one factorisation serves all angles.

*Trailing edge.* Where the ends of the contour meet (closer than 10⁻⁶ chords) the two end nodes give one
equation twice; the other then extrapolates the mean of the two end speeds linearly from the nodes before.
Where they do not meet, the base between them is a straight panel of constant source and vortex strength such
that the flow leaves the body along the bisector of the trailing edge at the speed of its ends: a free wake as
thick as the base. The base bears the pressure of the ends, which pushes it forward: with a base of thickness
h the pressure drag is −h Cp of the ends and not zero.

*Source* the panel integrals follow from ∫ln r ds and ∫s ln r ds; Kuethe and Chow, *Foundations of
Aerodynamics*, chapter 5, for linear vortex panels; the stream-function form and the base panel are common
practice (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.interpolate import CubicSpline
from scipy.linalg import lu_factor, lu_solve

from tapband.experiment.contour import Contour
from tapband.experiment.stream import critical_cp

Array = NDArray[np.float64]

SHARP = 1e-6
"""Gap [chords] below which the ends of a contour are one sharp trailing edge."""
_NEARER_ENDS = 0.5
LARGEST_PEAK = 7.0
"""Difference of Cp between trailing edge and suction peak past which a flow is not to be believed."""
LARGEST_LIFT = 1.5
"""Lift coefficient past which a flow is not to be believed."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Flow:
    """The flow at A angles of attack ``alpha`` (A,) [rad]; coefficients (A,) from the surface pressure.

    ``s`` (N,) are the nodes' arc lengths from the nose [chords], ``speed`` (A, N) the surface speed there
    over that of the stream, positive towards the upper trailing edge. ``cm`` is nose-up about (0.25, 0).
    Checks of the solution: ``cl_circulation``, the lift by Kutta and Joukowski, and ``cd_pressure``, zero but
    for the push on a blunt base.
    """

    contour: Contour
    alpha: Array
    s: Array
    speed: Array
    cl: Array
    cd_pressure: Array
    cn: Array
    ct: Array
    cm: Array
    cl_circulation: Array

    def cp(self, s: ArrayLike) -> Array:
        """Cp (A, n) at arc lengths s (n,) from the nose [chords]; the speed is splined between nodes."""
        return np.asarray(1.0 - CubicSpline(self.s, self.speed, axis=1)(np.asarray(s, dtype=np.float64)) ** 2)


def solve(x: ArrayLike, y: ArrayLike, alpha: ArrayLike, panels: int = 200) -> Flow:
    """The flow round the contour through points x, y (N,) [chords], in table order, at α (A,) [rad].

    *Assumes* incompressible, inviscid, attached flow without walls; an even number of panels.
    """
    return flow_round(Contour.of(np.asarray(x, float), np.asarray(y, float)), alpha, panels)


def flow_round(contour: Contour, alpha: ArrayLike, panels: int = 200) -> Flow:
    """As :func:`solve`, for a contour already splined."""
    angle = np.atleast_1d(np.asarray(alpha, dtype=np.float64))
    s = _nodes(contour, panels)
    x, y = contour.point(s)
    if np.hypot(x[-1] - x[0], y[-1] - y[0]) < SHARP:
        x[[0, -1]], y[[0, -1]] = np.mean(x[[0, -1]]), np.mean(y[[0, -1]])
    unit, base_vortex = _unit_speeds(s, x, y)
    components = np.stack([np.cos(angle), np.sin(angle)], axis=1)
    speed = components @ unit
    cn, ct, cm = _pressure_forces(contour, s, speed)
    length = np.hypot(np.diff(x), np.diff(y))
    circulation = 0.5 * (speed[:, 1:] + speed[:, :-1]) @ length + components @ base_vortex
    for array in (angle, s, speed):
        array.setflags(write=False)
    return Flow(
        contour=contour,
        alpha=angle,
        s=s,
        speed=speed,
        cl=cn * np.cos(angle) - ct * np.sin(angle),
        cd_pressure=cn * np.sin(angle) + ct * np.cos(angle),
        cn=cn,
        ct=ct,
        cm=cm,
        cl_circulation=2.0 * circulation,
    )


def _nodes(contour: Contour, panels: int) -> Array:
    """Arc lengths (panels + 1,) from lower to upper trailing edge: cosine-like, one node at the nose.

    Steps at nose and trailing edges are (1 − 0.5)² of those of plain cosine spacing: on exact sections that
    takes the error of the suction peak to 0.4 times, that of the pressure drag to 0.6 times.
    """
    t = np.linspace(0.0, 1.0, panels // 2 + 1)
    share = 0.5 * (1.0 - np.cos(np.pi * t - 0.5 * _NEARER_ENDS * np.sin(2.0 * np.pi * t)))
    return np.concatenate([contour.s_lower * share[::-1], contour.s_upper * share[1:]])


def _unit_speeds(s: Array, x: Array, y: Array) -> tuple[Array, Array]:
    """Surface speeds (2, N) in a stream along x and one along y, and the circulation (2,) of the base."""
    size = x.size
    matrix = np.zeros((size + 1, size + 1))
    matrix[:size, :size] = _vortex_panels(x, y)
    matrix[:size, size] = -1.0
    matrix[size, [0, size - 1]] = 1.0
    right = np.zeros((size + 1, 2))
    right[:size, 0], right[:size, 1] = -y, x
    base_vortex = np.zeros(size)
    if x[0] == x[-1] and y[0] == y[-1]:
        matrix[size - 1], right[size - 1] = _mean_end_speed(s), 0.0
    else:
        psi, circulation = _base_panel(x, y)
        # The wake's speed is half the difference of the end strengths, which point opposite ways.
        matrix[:size, size - 1] += 0.5 * psi
        matrix[:size, 0] -= 0.5 * psi
        base_vortex[[-1, 0]] = 0.5 * circulation, -0.5 * circulation
    unit = lu_solve(lu_factor(matrix), right)[:size].T
    return np.asarray(unit), np.asarray(unit @ base_vortex)


def _vortex_panels(x: Array, y: Array) -> Array:
    """ψ at node i per unit (clockwise) vortex strength at node j, (N, N): ψ = ∫γ ln r ds / 2π.

    The strength varies linearly along each straight panel between nodes.
    """
    dx, dy = np.diff(x), np.diff(y)
    length = np.hypot(dx, dy)
    rx, ry = x[:, None] - x[:-1], y[:, None] - y[:-1]
    along = (rx * dx + ry * dy) / length
    aside = np.abs(ry * dx - rx * dy) / length
    zeroth_end, first_end = _log_integrals(length - along, aside)
    zeroth_start, first_start = _log_integrals(-along, aside)
    zeroth = zeroth_end - zeroth_start
    first = (first_end - first_start + along * zeroth) / length
    psi = np.zeros((x.size, x.size))
    psi[:, 1:] += first
    psi[:, :-1] += zeroth - first
    return psi / (2.0 * np.pi)


def _log_integrals(u: Array, h: Array) -> tuple[Array, Array]:
    """Primitives of ln √(u² + h²) and u ln √(u² + h²) in u."""
    square = u * u + h * h
    log = np.log(np.where(square > 0.0, square, 1.0))
    return 0.5 * u * log - u + h * np.arctan2(u, h), 0.25 * (square * log - u * u)


def _base_panel(x: Array, y: Array) -> tuple[Array, float]:
    """ψ (N,) of the base per unit speed of the wake, and the base's circulation per unit speed.

    The angle to the source is measured from the upstream bisector, so that its jump lies in the wake.
    """
    gap = np.array([x[-1] - x[0], y[-1] - y[0]])
    length = float(np.hypot(*gap))
    panel = gap / length
    ends = np.array([[x[0] - x[1], y[0] - y[1]], [x[-1] - x[-2], y[-1] - y[-2]]])
    ends /= np.linalg.norm(ends, axis=1)[:, None]
    downstream = ends.sum(axis=0) / np.linalg.norm(ends.sum(axis=0))
    rx, ry = x - x[0], y - y[0]
    along, aside = rx * panel[0] + ry * panel[1], ry * panel[0] - rx * panel[1]
    source = _angle_integral(rx, ry, along, aside, -downstream)
    source -= _angle_integral(x - x[-1], y - y[-1], along - length, aside, -downstream)
    zeroth = _log_integrals(length - along, np.abs(aside))[0] - _log_integrals(-along, np.abs(aside))[0]
    strength = abs(panel[0] * downstream[1] - panel[1] * downstream[0])
    # Walked from the upper end to the lower one, the base turns the way the surface does.
    turning = -float(panel @ downstream)
    return (strength * source + turning * zeroth) / (2.0 * np.pi), turning * length


def _angle_integral(rx: Array, ry: Array, u: Array, h: Array, axis: Array) -> Array:
    """Primitive in u of the angle of r = (rx, ry) measured from ``axis``: u φ + h ln r."""
    angle = np.arctan2(ry * axis[0] - rx * axis[1], rx * axis[0] + ry * axis[1])
    radius = np.hypot(rx, ry)
    return np.asarray(u * angle + h * np.log(np.where(radius > 0.0, radius, 1.0)))


def _mean_end_speed(s: Array) -> Array:
    """Row (N + 1,) saying: the mean speed at the two ends continues the line through the nodes before."""
    row = np.zeros(s.size + 1)
    for sign, (end, one, two) in ((1.0, (s.size - 1, s.size - 2, s.size - 3)), (-1.0, (0, 1, 2))):
        ratio = (s[end] - s[one]) / (s[one] - s[two])
        row[[end, one, two]] = sign, -sign * (1.0 + ratio), sign * ratio
    return row


def _pressure_forces(contour: Contour, s: Array, speed: Array) -> tuple[Array, Array, Array]:
    """cn, ct, cm (A,) of Cp on the true contour; a base bears the mean of the end pressures."""
    node, weight = np.polynomial.legendre.leggauss(4)
    half = 0.5 * np.diff(s)[:, None]
    at = (0.5 * (s[1:] + s[:-1])[:, None] + half * node).ravel()
    ds = (half * weight).ravel()
    cp = 1.0 - CubicSpline(s, speed, axis=1)(at) ** 2
    x, y = contour.point(at)
    dx, dy = contour.x_of(at, 1) * ds, contour.y_of(at, 1) * ds
    ends = contour.point(s[[-1, 0]])
    base_cp = 1.0 - 0.5 * (speed[:, 0] ** 2 + speed[:, -1] ** 2)
    bx, by = float(np.diff(ends[0])[0]), float(np.diff(ends[1])[0])
    middle_x, middle_y = float(np.mean(ends[0])), float(np.mean(ends[1]))
    cn = -cp @ dx - base_cp * bx
    ct = cp @ dy + base_cp * by
    cm = cp @ ((x - 0.25) * dx + y * dy) + base_cp * ((middle_x - 0.25) * bx + middle_y * by)
    return cn, ct, cm


def limits_said(flow: Flow, mach: float = 0.0) -> tuple[str, ...]:
    """What this flow leaves out, and where it is past what a real boundary layer or sound allows.

    The suction peak is held against the difference of 7 between peak and trailing edge at which sections of
    Reynolds numbers near 10⁶ are about to stall, and lift against 1.5, which plain sections hardly exceed
    (common practice, no source; in the manner of Valarezo and Chin, J. Aircraft 31, 1994, from memory).
    Pressures are moved to ``mach`` by the rule of Prandtl and Glauert.
    """
    said = [
        "Expected pressures are those of inviscid attached flow: no boundary layer, no stall, no drag; "
        "real lift is some per cent smaller and real suction peaks lower."
    ]
    beta = np.sqrt(1.0 - min(mach, 0.99) ** 2)
    lowest = np.min(1.0 - flow.speed**2, axis=1) / beta
    edge = (1.0 - 0.5 * (flow.speed[:, 0] ** 2 + flow.speed[:, -1] ** 2)) / beta
    steep = edge - lowest > LARGEST_PEAK
    if np.any(steep):
        said.append(
            f"Suction peak too high to be real at {_angles(flow.alpha[steep])}: Cp falls to "
            f"{np.min(lowest):.1f}, more than {LARGEST_PEAK:g} below the trailing edge; expect separation."
        )
    lifting = np.abs(flow.cl) / beta > LARGEST_LIFT
    if np.any(lifting):
        said.append(
            f"|cl| exceeds {LARGEST_LIFT:g} at {_angles(flow.alpha[lifting])}: expect stall before it."
        )
    critical = float(critical_cp(np.asarray(mach))) if mach > 0.0 else -np.inf
    sonic = lowest < critical
    if np.any(sonic):
        said.append(
            f"Locally supersonic at {_angles(flow.alpha[sonic])}: Cp below the critical {critical:.2f} "
            f"of Mach {mach:g}; no rule from incompressible flow holds there."
        )
    return tuple(said)


def _angles(alpha: Array) -> str:
    """Angles [rad] in words: alpha 8, 10 deg."""
    return "alpha " + ", ".join(f"{a:g}" for a in np.round(np.degrees(alpha), 3)) + " deg"
