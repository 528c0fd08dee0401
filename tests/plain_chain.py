"""The chain of a test point once more, as plain sums that share no code with the project.

Works on floats, complex numbers, arrays of trials and ``uncertainties`` numbers alike. Takes from the project
only the contour's two splines.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
from scipy.interpolate import CubicSpline

from tapband.experiment.contour import Contour


@dataclass(frozen=True, kw_only=True)
class Plain:
    """Weights, slopes and curvatures found by integrating one cardinal spline after the other."""

    taps: list[int]
    weights: list[list[float]]
    slope: list[list[float]]
    curvature: list[list[float]]
    edge_common: list[float]
    edge_loading: list[float]


def plain(contour: Contour, s: Sequence[float], live: Sequence[bool]) -> Plain:
    """For a sharp edge closed at the mean of the rear taps, by Gauss sums of order twelve a piece."""
    order = [i for i in sorted(range(len(s)), key=lambda i: s[i]) if live[i]]
    nodes = [contour.s_lower, *(s[i] for i in order), contour.s_upper]
    breaks = sorted({*nodes, *contour.knots.tolist()})
    gauss, gauss_weight = np.polynomial.legendre.leggauss(12)
    at, w = [], []
    for low, high in pairwise(breaks):
        for g, gw in zip(gauss, gauss_weight, strict=True):
            at.append(0.5 * (low + high) + 0.5 * (high - low) * g)
            w.append(0.5 * (high - low) * gw)
    at_, w_ = np.array(at), np.array(w)
    x, y, dx, dy = contour.x_of(at_), contour.y_of(at_), contour.x_of(at_, 1), contour.y_of(at_, 1)
    by_node, slopes, bends = [], [], []
    for k in range(len(nodes)):
        spline = CubicSpline(nodes, np.eye(len(nodes))[k])
        value = spline(at_)
        by_node.append(
            [-np.sum(w_ * value * dx), np.sum(w_ * value * dy), np.sum(w_ * value * (x * dx + y * dy))]
        )
        slopes.append([spline(s[i], 1) for i in order])
        bends.append([spline(s[i], 2) for i in order])

    def closed(values: list[Any]) -> list[Any]:
        """Node columns gathered on the live taps: the two ends stand at the mean of the rear taps."""
        inner = [np.asarray(v, dtype=float) for v in values[1:-1]]
        ends = np.asarray(values[0], dtype=float) + np.asarray(values[-1], dtype=float)
        inner[0] = inner[0] + 0.5 * ends
        inner[-1] = inner[-1] + 0.5 * ends
        return [v.tolist() for v in inner]

    return Plain(
        taps=order, weights=closed(by_node), slope=closed(slopes), curvature=closed(bends),
        edge_common=[a + b for a, b in zip(by_node[0], by_node[-1], strict=True)],
        edge_loading=[b - a for a, b in zip(by_node[0], by_node[-1], strict=True)],
    )  # fmt: skip


@dataclass(frozen=True, kw_only=True)
class Maths:
    """Functions for whatever the values are.

    ``plain_value`` drops what a value carries beside its number; ``settle`` lets lazy values work out their
    derivatives, which would otherwise be worked out again at every use.
    """

    sqrt: Callable[[Any], Any]
    cos: Callable[[Any], Any]
    sin: Callable[[Any], Any]
    plain_value: Callable[[Any], Any] = lambda value: value
    settle: Callable[[Any], Any] = lambda value: value


def coefficients(
    chain: Plain,
    maths: Maths,
    *,
    reading: Mapping[int, Any],
    p_total: Any,
    p_static: Any,
    alpha: Any,
    shift: Mapping[int, Any],
    extra: Mapping[int, Any],
    mach_shift: Any = 0.0,
    q_shift: Any = 0.0,
    centre: Any = 0.25,
    edge_common: Any = 0.0,
    edge_loading: Any = 0.0,
) -> list[Any]:
    """cn, ct, cm, cl, cd_pressure from absolute readings, total and static pressure."""
    keep = maths.settle
    m2 = 5.0 * ((p_total / p_static) ** (1.0 / 3.5) - 1.0)
    mach = keep(maths.sqrt(m2) + mach_shift)
    static = p_total / (1.0 + 0.2 * mach * mach) ** 3.5
    q = keep(0.7 * static * mach * mach + q_shift)
    # The Mach number that has this q at this total pressure: Newton steps on plain numbers, then one that
    # carries the derivatives (exact at the root, by the implicit function theorem).
    bare_q, bare_total, root = (maths.plain_value(v) for v in (q, p_total, mach))
    for _ in range(20):
        root = root - _newton(root, bare_total, bare_q)
    mach = keep(root - _newton(root, p_total, q))
    static = keep(p_total / (1.0 + 0.2 * mach * mach) ** 3.5)
    cp = [keep((reading[i] - static) / q + extra[i]) for i in chain.taps]
    placed = []
    for k, i in enumerate(chain.taps):
        slope = sum(cp[j] * chain.slope[j][k] for j in range(len(cp)))
        bend = sum(cp[j] * chain.curvature[j][k] for j in range(len(cp)))
        placed.append(keep(cp[k] - shift[i] * slope + 0.5 * shift[i] * shift[i] * bend))
    cn, ct, cm0 = (
        sum(placed[j] * chain.weights[j][row] for j in range(len(placed)))
        + edge_common * chain.edge_common[row]
        + edge_loading * chain.edge_loading[row]
        for row in range(3)
    )
    cl = cn * maths.cos(alpha) - ct * maths.sin(alpha)
    cd = cn * maths.sin(alpha) + ct * maths.cos(alpha)
    return [cn, ct, cm0 + centre * cn, cl, cd]


def _newton(mach: Any, p_total: Any, q: Any) -> Any:
    t = 1.0 + 0.2 * mach * mach
    here = 0.7 * p_total * mach * mach / t**3.5
    return (here - q) / (1.4 * p_total * mach / t**3.5 * (1.0 - 0.7 * mach * mach / t))
