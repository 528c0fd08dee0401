"""Kármán-Trefftz sections: contour, pressure and coefficients in closed form, in chords with x from the nose.

The outside truth that several tests hold the reduction and the inviscid flow against.

*Source* von Kármán and Trefftz, Z. Flugtechnik Motorluftschiffahrt 9 (1918), from memory; the moment by
residues of the Blasius integral, which ``test_exact_sections`` checks against integrated pressure.

Notation: circle ζ = μ + R exp(iθ) through b = 1, R = |b − μ|, β = −arg(b − μ); r = (ζ − b)/(ζ + b), w = rⁿ,
z = n b (1 + w)/(1 − w); trailing-edge angle (2 − n)π. θ runs from −β (upper trailing edge) over the nose to
2π − β (lower trailing edge).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]
LayoutName = Literal["cosine", "sqrt"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Coefficients:
    """Exact coefficients, any shape; pressure drag is zero. ``cm`` about x/c = 0.25, y = 0, nose-up."""

    cl: Array
    cn: Array
    ct: Array
    cm: Array


@dataclass(frozen=True, slots=True, kw_only=True)
class TapPlaces:
    """Taps (n,) from the lower trailing edge round the nose to the upper; ``s`` from the nose [chords]."""

    theta: Array
    s: Array
    x: Array
    y: Array
    upper: NDArray[np.bool_]


@dataclass(frozen=True, slots=True, kw_only=True)
class KarmanTrefftz:
    """One section: centre of the circle μ (Re μ < 0 gives thickness, Im μ camber), exponent n (1 < n ≤ 2)."""

    mu: complex
    n: float
    chord: float
    """Of the section in the z plane, where b = 1."""
    x_nose: float
    """Least x in the z plane."""
    theta_nose: float

    @property
    def beta(self) -> float:
        """−arg(b − μ)."""
        return float(-np.angle(1.0 - self.mu))

    @property
    def thickness(self) -> float:
        """Largest y_upper − y_lower [chords], on 400 stations (good to about 1e-5)."""
        x = 0.5 * (1.0 - np.cos(np.linspace(0.0, np.pi, 402)))[1:-1]
        upper = self.point(self.theta_at(x, np.ones(400, bool)))[1]
        lower = self.point(self.theta_at(x, np.zeros(400, bool)))[1]
        return float(np.max(upper - lower))

    def point(self, theta: ArrayLike) -> tuple[Array, Array]:
        """(x, y) [chords] at angles θ of the circle [rad], same shape."""
        w = _ratio(self.mu, np.asarray(theta, float)) ** self.n
        z = self.n * (1.0 + w) / (1.0 - w)
        return (z.real - self.x_nose) / self.chord, z.imag / self.chord

    def cp(self, theta: ArrayLike, alpha: ArrayLike) -> Array:
        """Cp (..., k) at θ (k,) [rad] and angles of attack α (...) [rad].

        The zero of the velocity at ζ = b is divided out by hand, so the value holds at the trailing edge too.
        """
        angle = np.asarray(theta, float)
        a = np.asarray(alpha, float)[..., None]
        r = _ratio(self.mu, angle)
        u = abs(1.0 - self.mu) * np.exp(1j * angle)
        second_stagnation = -abs(1.0 - self.mu) * np.exp(1j * (2.0 * a + self.beta))
        stretch = r ** (2.0 - self.n) * (self.mu + u + 1.0) ** 3 * (1.0 - r**self.n) ** 2 / (4.0 * self.n**2)
        velocity = stretch * (u - second_stagnation) / u**2
        return np.asarray(1.0 - np.abs(velocity) ** 2)

    def theta_at(self, x: ArrayLike, upper: ArrayLike) -> Array:
        """θ at places x (k,) [chords] on the upper or lower surface (k,); by bisection (x is monotone)."""
        wanted, up = np.broadcast_arrays(np.asarray(x, float), np.asarray(upper, bool))
        near = np.full(wanted.shape, self.theta_nose)
        far = np.where(up, -self.beta, 2.0 * np.pi - self.beta)
        for _ in range(60):
            middle = 0.5 * (near + far)
            beyond = self.point(middle)[0] > wanted
            near, far = np.where(beyond, near, middle), np.where(beyond, middle, far)
        # Exact at both ends, where bisection would leave the rounding of a double root.
        edge = np.where(up, -self.beta, 2.0 * np.pi - self.beta)
        return np.asarray(np.where(wanted >= 1.0, edge, np.where(wanted <= 0.0, self.theta_nose, near)))

    def arc_length(self, theta: ArrayLike) -> Array:
        """Arc length s from the nose at θ (k,), upper surface positive [chords], to about 1e-12.

        Gauss-Legendre in t, θ = θ_nose + (θ_end − θ_nose)(1 − (1 − t)³): the cube takes the power law of the
        stretching at the trailing edge, (θ − θ_end)^(n − 1), off the integrand.
        """
        angle = np.asarray(theta, float)
        end = np.where(angle <= self.theta_nose, -self.beta, 2.0 * np.pi - self.beta)
        span = end - self.theta_nose
        t_end = 1.0 - np.cbrt(np.maximum(1.0 - (angle - self.theta_nose) / span, 0.0))
        node, weight = _gauss(32, 16)
        t = t_end[..., None] * node
        slope = _slope(self.mu, self.n, self.theta_nose + span[..., None] * (1.0 - (1.0 - t) ** 3))
        stretch = np.abs(slope) * abs(1.0 - self.mu) / self.chord
        length = t_end * np.sum(weight * stretch * 3.0 * (1.0 - t) ** 2, axis=-1)
        return np.asarray(-span * length)

    def contour(self, points: int = 401) -> tuple[Array, Array]:
        """(x, y) from the lower trailing edge round the nose to the upper one, equally spaced in θ."""
        theta = np.linspace(2.0 * np.pi - self.beta, -self.beta, points)
        x, y = self.point(theta)
        x[[0, -1]], y[[0, -1]] = 1.0, 0.0
        return x, y

    def coefficients(self, alpha: ArrayLike) -> Coefficients:
        """Exact coefficients at α [rad], same shape."""
        return coefficients(self.mu, self.n, alpha)

    def taps(self, count: int, layout: LayoutName, rearmost: float = 1.0) -> TapPlaces:
        """``count`` (odd) taps: one at the nose, the same x/c on both surfaces, the last at ``rearmost``.

        "cosine": x = rearmost (1 − cos πt)/2; "sqrt": x = rearmost t², equal steps of t.
        """
        half = count // 2
        t = np.arange(1, half + 1) / half
        x = rearmost * (0.5 * (1.0 - np.cos(np.pi * t)) if layout == "cosine" else t**2)
        places = np.concatenate([x[::-1], [0.0], x])
        upper = np.arange(count) >= half
        return self.taps_at(places, upper)

    def taps_at(self, x: ArrayLike, upper: ArrayLike) -> TapPlaces:
        """Taps at places x (n,) [chords] of a surface (n,), in the order given."""
        theta = self.theta_at(x, upper)
        px, py = self.point(theta)
        return TapPlaces(theta=theta, s=self.arc_length(theta), x=px, y=py, upper=np.array(upper, bool))


def section(mu: complex, n: float = 2.0) -> KarmanTrefftz:
    """The section of centre μ and exponent n."""
    x_nose, theta = _nose(np.asarray(mu, complex), np.asarray(n, float))
    return KarmanTrefftz(
        mu=complex(mu), n=float(n), chord=float(n - x_nose), x_nose=float(x_nose), theta_nose=float(theta)
    )


@lru_cache(maxsize=64)
def section_of(thickness: float, camber: float = 0.0, trailing_edge_angle: float = 10.0) -> KarmanTrefftz:
    """A section of given thickness [chords], about this camber [chords] and trailing-edge angle [deg]."""
    n = 2.0 - trailing_edge_angle / 180.0
    less, more = -0.3, -0.001
    for _ in range(30):
        middle = 0.5 * (less + more)
        thick = section(complex(middle, 2.0 * camber), n).thickness > thickness
        less, more = (middle, more) if thick else (less, middle)
    return section(complex(0.5 * (less + more), 2.0 * camber), n)


def coefficients(mu: ArrayLike, n: ArrayLike, alpha: ArrayLike) -> Coefficients:
    """Exact coefficients, broadcast over μ, n and α [rad].

    With G the circulation: cl = 2G/c; about z = 0 cm = [4πk sin 2α − 2G Re(μ e^{−iα})]/c², k = (n² − 1)/3.
    """
    m, e, a = np.broadcast_arrays(np.asarray(mu, complex), np.asarray(n, float), np.asarray(alpha, float))
    x_nose = _nose(m, e)[0]
    chord = e - x_nose
    circulation = 4.0 * np.pi * np.abs(1.0 - m) * np.sin(a - np.angle(1.0 - m))
    cl = 2.0 * circulation / chord
    k = (e**2 - 1.0) / 3.0
    cm_origin = 4.0 * np.pi * k * np.sin(2.0 * a) - 2.0 * circulation * (m * np.exp(-1j * a)).real
    cm = cm_origin / chord**2 + (x_nose + 0.25 * chord) * cl * np.cos(a) / chord
    return Coefficients(cl=cl, cn=cl * np.cos(a), ct=-cl * np.sin(a), cm=cm)


def _ratio(mu: complex | NDArray[np.complex128], theta: Array) -> NDArray[np.complex128]:
    """(ζ − b)/(ζ + b); the difference by half angles, exact zero at the trailing edge."""
    edge = 1.0 - np.asarray(mu)
    radius, edge_angle = np.abs(edge), np.angle(edge)
    half = 0.5 * (theta - edge_angle)
    sine = np.where(np.abs(theta - edge_angle - 2.0 * np.pi) < 1e-14, 0.0, np.sin(half))
    difference = 2j * radius * sine * np.exp(0.5j * (theta + edge_angle))
    return np.asarray(difference / (difference + 2.0))


def _nose(mu: NDArray[np.complex128], n: Array) -> tuple[Array, Array]:
    """Least x in the z plane and its θ, each of the broadcast shape of μ and n; bisection on dx/dθ."""
    m, e = np.broadcast_arrays(mu, n)
    low = np.angle(1.0 - m) + 0.1
    high = low + 2.0 * np.pi - 0.2
    for _ in range(60):
        theta = 0.5 * (low + high)
        falling = (_slope(m, e, theta) * 1j * np.exp(1j * theta)).real < 0.0
        low, high = np.where(falling, theta, low), np.where(falling, high, theta)
    w = _ratio(m, low) ** e
    return np.asarray((e * (1.0 + w) / (1.0 - w)).real), low


def _slope(mu: complex | NDArray[np.complex128], n: float | Array, theta: Array) -> NDArray[np.complex128]:
    """dz/dζ."""
    r = _ratio(mu, theta)
    zeta = mu + np.abs(1.0 - np.asarray(mu)) * np.exp(1j * theta)
    return np.asarray(4.0 * n**2 * r ** (n - 1.0) / ((zeta + 1.0) * (1.0 - r**n)) ** 2)


@lru_cache(maxsize=4)
def _gauss(panels: int, order: int) -> tuple[Array, Array]:
    """Nodes and weights of a composite Gauss-Legendre rule on 0…1."""
    node, weight = np.polynomial.legendre.leggauss(order)
    left = np.arange(panels)[:, None] / panels
    return (left + 0.5 * (node + 1.0) / panels).ravel(), np.tile(0.5 * weight / panels, panels)
