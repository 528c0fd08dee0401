"""Shapes of standardised latents: from generators to draws, characteristic functions, cumulants.

Every shape has mean 0 and, where its scale is known exactly, variance 1. A finite number of degrees of
freedom makes a normal latent Student's t (normal · √(ν/χ²), variance ν/(ν − 2)); doubt r in a half-width
makes a bounded latent wider or narrower as a whole (times 1 + √3 r V, V uniform on ±1, variance 1 + r²).

*Source* JCGM 101:2008, 6.4; t as a scale mixture: JCGM 101, 6.4.9.
"""

from __future__ import annotations

from functools import lru_cache
from math import pi, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaln, j0, kve

from tapband.nouns.problem import Family
from tapband.nouns.source import Shape, divisor_of

Array = NDArray[np.float64]

DOUBT_NODES, _weights = np.polynomial.legendre.leggauss(12)
DOUBT_WEIGHTS: Array = 0.5 * _weights
"""Gauss-Legendre rule for the mean over V uniform on ±1."""

_DEBYE_FROM = 40.0
"""Order of K above which its uniform expansion replaces it (three terms: relative error below 1e-8)."""


def half_width(shape: Shape, top: float = 0.0) -> float:
    """Half-width of the standardised shape; inf for a normal one."""
    return float("inf") if shape is Shape.NORMAL else divisor_of(shape, top)


def fill(generator: np.random.Generator, shape: Shape, top: float, out: Array) -> Array:
    """``out`` filled with standardised draws, in memory order: one generator call a value or its quantile.

    *Source* quantile functions of JCGM 101:2008, 6.4.2-6.4.6.
    """
    if shape is Shape.NORMAL:
        return generator.standard_normal(out=out)
    generator.random(out=out)
    if shape is Shape.RECTANGULAR:
        out -= 0.5
        out *= sqrt(12.0)
        return out
    if shape is Shape.ARCSINE:
        out -= 0.5
        out *= pi
        np.sin(out, out=out)
        out *= sqrt(2.0)
        return out
    beta = top if shape is Shape.TRAPEZOIDAL else 0.0
    out *= 2.0
    out -= 1.0
    out[...] = np.copysign(_trapezoid(np.abs(out), beta), out)
    return out


def _trapezoid(inside: Array, beta: float) -> Array:
    """|x| below which the standardised trapezoid of top ratio β has the probability ``inside``."""
    half = divisor_of(Shape.TRAPEZOIDAL, beta)
    slope = 1.0 - np.sqrt((1.0 - inside) * (1.0 - beta * beta))
    return half * np.where(inside <= 2.0 * beta / (1.0 + beta), 0.5 * (1.0 + beta) * inside, slope)


def doubt(family: Family, point: int) -> float:
    """r of a bounded family at a point; a bare ν on limits says the same (JCGM 100, G.4.2, eq. G.3)."""
    if family.shape is Shape.NORMAL:
        return 0.0
    if family.reliability > 0.0:
        return family.reliability
    return float(np.sqrt(0.5 / family.dof[point]))


def effective_dof(family: Family) -> Array:
    """ν (P,) of the family's variance for Welch-Satterthwaite; r counts as 1/(2 r²) (JCGM 100, G.4.2)."""
    if family.reliability > 0.0:
        return np.minimum(family.dof, 0.5 / family.reliability**2)
    return family.dof


def variance(family: Family) -> Array:
    """Variance (P,) of a latent; NaN for Student's t with ν ≤ 2."""
    if family.shape is not Shape.NORMAL:
        r2 = family.reliability**2 if family.reliability > 0.0 else 0.5 / family.dof
        return np.broadcast_to(1.0 + r2, family.dof.shape)
    nu = np.where(np.isinf(family.dof), 3.0, family.dof)
    spread = np.divide(nu, nu - 2.0, out=np.full(nu.shape, np.nan), where=nu > 2.0)
    return np.where(np.isinf(family.dof), 1.0, spread)


def characteristic(shape: Shape, top: float, omega: Array) -> Array:
    """E exp(iωξ) of a standardised shape with exactly known scale; real, for all are symmetric."""
    match shape:
        case Shape.NORMAL:
            return np.exp(-0.5 * omega * omega)
        case Shape.RECTANGULAR:
            return np.sinc(omega * (sqrt(3.0) / pi))
        case Shape.ARCSINE:
            return np.asarray(j0(sqrt(2.0) * omega))
        case Shape.TRIANGULAR:
            return np.sinc(omega * (0.5 * sqrt(6.0) / pi)) ** 2
        case Shape.TRAPEZOIDAL:
            quarter = 0.5 * divisor_of(shape, top) / pi
            return np.sinc(omega * (quarter * (1.0 + top))) * np.sinc(omega * (quarter * (1.0 - top)))


def log_coefficients(shape: Shape, top: float = 0.0) -> tuple[float, float, float]:
    """c4, c6, c8 of log E exp(iωξ) = −ω²/2 + c4 ω⁴ + c6 ω⁶ + c8 ω⁸ + …

    *Source* log(sin y/y) = −y²/6 − y⁴/180 − y⁶/2835 − y⁸/37800 (DLMF 4.19.7); a trapezoid is the sum of two
    rectangles; log J0(y) = −y²/4 − y⁴/64 − y⁶/576 − 11 y⁸/49152 (Rayleigh sums, DLMF 10.21.55).
    """
    sine = (-1.0 / 180.0, -1.0 / 2835.0, -1.0 / 37800.0)
    match shape:
        case Shape.NORMAL:
            return (0.0, 0.0, 0.0)
        case Shape.ARCSINE:
            return (-4.0 / 64.0, -8.0 / 576.0, -16.0 * 11.0 / 49152.0)
        case Shape.RECTANGULAR:
            widths = (sqrt(3.0), 0.0)
        case _:
            beta = top if shape is Shape.TRAPEZOIDAL else 0.0
            half = 0.5 * divisor_of(shape, top)
            widths = (half * (1.0 + beta), half * (1.0 - beta))
    four, six, eight = (sum(w**n for w in widths) * c for n, c in zip((4, 6, 8), sine, strict=True))
    return four, six, eight


@lru_cache(maxsize=64)
def gauss_rule(shape: Shape, top: float = 0.0) -> tuple[Array, Array]:
    """Nodes and weights (5,) of the Gauss rule of a standardised shape: exact to the ninth moment.

    *Source* G. H. Golub, J. H. Welsch, Math. Comp. 23 (1969) 221, recurrence by the discretised Stieltjes
    procedure; weights of the normal shape are those of Gauss-Hermite.
    """
    if shape is Shape.NORMAL:
        nodes, weights = np.polynomial.hermite_e.hermegauss(5)
        return nodes, weights / weights.sum()
    half = half_width(shape, top)
    if shape is Shape.ARCSINE:
        return half * np.cos((2.0 * np.arange(5, 0, -1) - 1.0) * (pi / 10.0)), np.full(5, 0.2)
    x, mass = np.polynomial.legendre.leggauss(32)
    beta = {Shape.RECTANGULAR: 1.0, Shape.TRIANGULAR: 0.0}.get(shape, top)
    edges = np.array([-1.0, -beta, 0.0, beta, 1.0])
    middle, wide = 0.5 * (edges[1:] + edges[:-1])[:, None], 0.5 * np.diff(edges)[:, None]
    points = (middle + wide * x).ravel()
    slope = np.minimum((1.0 - np.abs(points)) / max(1.0 - beta, 1e-12), 1.0)
    measure = (wide * mass).ravel() * slope
    nodes, weights = _golub_welsch(points, measure / measure.sum())
    return half * nodes, weights


def _golub_welsch(points: Array, measure: Array) -> tuple[Array, Array]:
    """Five-point Gauss rule of a symmetric discrete measure."""
    before, now = np.zeros_like(points), np.ones_like(points)
    off: list[float] = []
    for _ in range(4):
        after = points * now - (off[-1] ** 2 if off else 0.0) * before
        off.append(float(np.sqrt((measure * after * after).sum() / (measure * now * now).sum())))
        before, now = now, after
    nodes, vectors = np.linalg.eigh(np.diag(off, 1) + np.diag(off, -1))
    return nodes, vectors[0] ** 2


def student(nu: Array, omega: Array) -> Array:
    """E exp(iωT) of Student's t; ``nu`` and ``omega`` broadcast, ν finite.

    x^μ K_μ(x)/(Γ(μ) 2^{μ−1}) with μ = ν/2, x = √ν|ω|; large orders by Debye's uniform expansion.

    *Source* S. Hurst, The characteristic function of the Student t distribution (1995); DLMF 10.41.4.
    """
    mu, x = np.broadcast_arrays(0.5 * nu, np.sqrt(nu) * np.abs(omega))
    safe = np.maximum(x, 1e-300)
    small = mu < _DEBYE_FROM
    log_k = np.empty(mu.shape)
    with np.errstate(over="ignore", divide="ignore"):
        log_k[small] = np.log(kve(mu[small], safe[small])) - safe[small]
    log_k[~small] = _debye(mu[~small], safe[~small])
    exponent = mu * np.log(safe) + log_k - gammaln(mu) - (mu - 1.0) * np.log(2.0)
    # K overflows only where x is so small that the function is 1 to rounding.
    return np.where(np.isfinite(exponent), np.exp(np.minimum(exponent, 0.0)), 1.0)


def _debye(mu: Array, x: Array) -> Array:
    """log K_μ(x) for large order (DLMF 10.41.4, polynomials 10.41.10)."""
    z = x / mu
    root = np.sqrt(1.0 + z * z)
    p = 1.0 / root
    p2 = p * p
    eta = root + np.log(z / (1.0 + root))
    one = p * (3.0 - 5.0 * p2) / 24.0
    two = p2 * (81.0 - 462.0 * p2 + 385.0 * p2 * p2) / 1152.0
    three = p * p2 * (30375.0 - 369603.0 * p2 + 765765.0 * p2 * p2 - 425425.0 * p2 * p2 * p2) / 414720.0
    series = 1.0 - one / mu + two / mu**2 - three / mu**3
    result: Array = 0.5 * np.log(pi / (2.0 * mu)) - mu * eta - 0.5 * np.log(root) + np.log(series)
    return result
