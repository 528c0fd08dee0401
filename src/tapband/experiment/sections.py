"""Contours of sections given by public formulas: the NACA four- and five-digit families.

*Source* NACA Report 460 (four digits) and NACA Report 537 (five digits); both in Abbott and von Doenhoff,
*Theory of Wing Sections*, sections 6.4 and 6.5 (from memory).
"""

from __future__ import annotations

from math import sqrt

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

_THICKNESS = (0.2969, -0.1260, -0.3516, 0.2843)
_OPEN, _CLOSED = -0.1015, -0.1036


def four_digit(
    camber: float, camber_place: float, thickness: float, points: int = 201, *, closed: bool = True
) -> tuple[Array, Array]:
    """Contour (x, y), each (points,), from the lower trailing edge round the nose to the upper one [chords].

    ``camber`` and ``thickness`` [chords], ``camber_place`` [x/c]; stations are cosine-spaced. ``closed``
    takes the trailing edge to zero thickness by the last coefficient of the thickness series.
    """
    x = _stations(points)
    ahead = x < camber_place
    m, p = camber, camber_place
    if m == 0.0:
        return _around(x, np.zeros_like(x), np.zeros_like(x), thickness, closed)
    scale = np.where(ahead, m / p**2, m / (1.0 - p) ** 2)
    line = scale * np.where(ahead, 2.0 * p * x - x**2, 1.0 - 2.0 * p + 2.0 * p * x - x**2)
    return _around(x, line, 2.0 * scale * (p - x), thickness, closed)


def five_digit(
    lift: float, camber_place: float, thickness: float, points: int = 201, *, closed: bool = True
) -> tuple[Array, Array]:
    """As :func:`four_digit`, with the mean line of the five-digit family (no reflex).

    ``lift`` is the design lift coefficient (0.3 for 23012), ``camber_place`` the place of the largest
    camber [x/c]. The constants follow from their definitions instead of the printed, rounded ones: m from
    camber_place = m (1 − √(m/3)), k1 from zero leading-edge singularity of thin-section theory.
    """
    x = _stations(points)
    m = camber_place
    for _ in range(60):
        m = camber_place / (1.0 - sqrt(m / 3.0))
    q = (3.0 * m - 7.0 * m**2 + 8.0 * m**3 - 4.0 * m**4) / sqrt(m * (1.0 - m))
    q -= 1.5 * (1.0 - 2.0 * m) * (0.5 * np.pi - np.arcsin(1.0 - 2.0 * m))
    k = 6.0 * lift / q
    ahead = x < m
    line = k / 6.0 * np.where(ahead, x**3 - 3.0 * m * x**2 + m**2 * (3.0 - m) * x, m**3 * (1.0 - x))
    slope = k / 6.0 * np.where(ahead, 3.0 * x**2 - 6.0 * m * x + m**2 * (3.0 - m), -(m**3))
    return _around(x, line, slope, thickness, closed)


def _stations(points: int) -> Array:
    """x from 1 to 0 and back, cosine-spaced, (points,)."""
    return np.asarray(0.5 * (1.0 + np.cos(np.linspace(0.0, 2.0 * np.pi, points))))


def _around(x: Array, line: Array, slope: Array, thickness: float, closed: bool) -> tuple[Array, Array]:
    """Half thicknesses laid off square to the mean line: lower surface first."""
    a0, a1, a2, a3 = _THICKNESS
    a4 = _CLOSED if closed else _OPEN
    half = 5.0 * thickness * (a0 * np.sqrt(x) + x * (a1 + x * (a2 + x * (a3 + x * a4))))
    side = np.where(np.arange(x.size) <= x.size // 2, -half, half)
    angle = np.arctan(slope)
    return x - side * np.sin(angle), line + side * np.cos(angle)
