"""Joint regions of two coefficients: the ellipse that holds both at the level.

The linearised ellipse has k² = χ²_{p;2}, or 2 F_p(2, ν) where the sizes of sources are known to so many
degrees of freedom. Where the latents' shapes make it hold another share, k is corrected for their fourth
cumulants or, past a small correction, is the quantile of the distance of joint draws in the metric of the
covariance. Where the equation is not nearly linear, the draws go through it, and the ellipse has their mean
and covariance.

*Source* JCGM 102:2011, 6.5.2 (k_p), 7.7.2 (ellipse from draws); ν by Willink and Hall, Metrologia 39 (2002)
361, from memory.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtri, fdtri

from tapband.nouns.problem import Family
from tapband.nouns.source import Shape
from tapband.probability.distributions import fill, log_coefficients
from tapband.probability.draws import fresh, keyed, scale
from tapband.probability.montecarlo import sample
from tapband.questions.bent import bent, moments
from tapband.questions.latents import Latents
from tapband.reduction import Reduced

Array = NDArray[np.float64]
PAIRS = (("cl", "cd_pressure"), ("cl", "cm"))
DRAWS = 20_000
SAME, SLIGHT = 0.001, 0.01
"""Differences in the share held, by the fourth cumulants, up to which k stands, and is corrected by them."""
LARGE = 0.05
"""Bounded latents of a smaller part in any direction count as normal."""
MOST = 40
"""Points whose trials go through the equation; more take what Monte Carlo found of each coefficient."""
LINEARISED, CUMULANTS, SHAPES, TRIALS, MOMENTS = (
    "ellipse, linearised",
    "ellipse, linearised, k for the shapes of the errors",
    "ellipse, Monte Carlo of the errors",
    "ellipse, Monte Carlo of the equation",
    "ellipse, Monte Carlo mean and spread, linearised correlation",
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Region:
    """One ellipse: centre and covariance of coefficients a and b, factor k, and how k was had."""

    point: int
    a: str
    b: str
    centre: tuple[float, float]
    covariance: Array
    """(2, 2)."""
    k: float
    method: str

    @property
    def axes(self) -> tuple[float, float, float]:
        """Semi-axes, and the angle [deg] from the axis of a to the major one, −90 to 90."""
        values, vectors = np.linalg.eigh(self.covariance)
        major = vectors[:, 1]
        tilt = float(np.degrees(np.arctan2(major[1], major[0])))
        tilt = tilt - 180.0 if tilt > 90.0 else tilt + 180.0 if tilt <= -90.0 else tilt
        small, large = np.sqrt(np.maximum(values, 0.0))
        return self.k * float(large), self.k * float(small), tilt


def regions(reduced: Reduced, latents: Latents) -> list[Region]:
    """The regions of every point and pair that has one, point by point."""
    curved = bent(reduced)
    found: list[Region] = []
    for names in PAIRS:
        found += _of_pair(reduced, latents, names, curved)
    return sorted(found, key=lambda region: region.point)


def _of_pair(
    reduced: Reduced, latents: Latents, names: tuple[str, str], curved: NDArray[np.bool_]
) -> list[Region]:
    level, seed = reduced.campaign.intervals.level, reduced.campaign.intervals.seed
    families = reduced.assembled.problem.families
    i, j = (latents.outputs.index(name) for name in names)
    covariance = reduced.linear.covariance[:, [[i], [j]], [i, j]]
    points = np.flatnonzero(np.isfinite(covariance).all(axis=(1, 2)))
    directions = whitened([s[points][:, [i, j]] for s in latents.sensitivity], covariance[points])
    k = factor(directions, latents.dof[:, points], level)
    change = change_of_share(families, directions, k)
    large = np.abs(change) > min(SLIGHT, 0.2 * (1.0 - level))  # else more than a fifth of what lies outside
    # The density of r² at k² is ½ exp(−k²/2); few degrees of freedom make k so large that it says nothing.
    square = k * k - 2.0 * np.where(large, 0.0, change) * np.exp(np.minimum(0.5 * k * k, 100.0))
    large |= (np.abs(change) > SAME) & (square <= 0.0)
    slight = np.sqrt(np.maximum(square, 0.0))
    centre = latents.estimate[points][:, [i, j]]
    shift, ratio = (part[:, [i, j]] for part in moments(reduced))
    left = MOST
    found = []
    for n, p in enumerate(points.tolist()):
        here, around, factor_, method = centre[n], covariance[p], float(k[n]), LINEARISED
        if large[n]:
            own = [one[n] for one in directions]
            factor_, method = drawn_factor(families, own, p, level, seed), SHAPES
        elif abs(change[n]) > SAME:
            factor_, method = float(slight[n]), CUMULANTS
        if curved[p, [i, j]].any():
            drawn = _by_trials(reduced, p, (i, j)) if left > 0 else None
            left -= 1
            if drawn is not None:
                here, around, factor_, method = *drawn, TRIALS
            else:
                here, around, method = here + shift[p], around * np.outer(ratio[p], ratio[p]), MOMENTS
        found.append(
            Region(
                point=p, a=names[0], b=names[1], centre=(float(here[0]), float(here[1])), covariance=around,
                k=factor_, method=method,
            )
        )  # fmt: skip
    return found


def whitened(sensitivity: Sequence[Array], covariance: Array) -> list[Array]:
    """(P, 2, G) a source: sensitivities in the metric in which the covariance (P, 2, 2) is the unit matrix."""
    values, vectors = np.linalg.eigh(covariance)
    large = values > 1e-14 * np.maximum(values[:, -1:], 0.0)
    unit = np.sqrt(np.where(large & (values > 0.0), values, np.inf))
    metric = np.swapaxes(vectors / unit[:, None, :], 1, 2)
    return [metric @ s for s in sensitivity]


def factor(directions: Sequence[Array], dof: Array, level: float) -> Array:
    """k (P,) of the linearised ellipse; ``directions`` (P, 2, G) a source, whitened, ``dof`` (S, P)."""
    terms = np.zeros(dof.shape[1])
    for one, nu in zip(directions, dof, strict=True):
        if not np.all(np.isinf(nu)):
            own = one @ np.swapaxes(one, 1, 2)
            trace = np.trace(own, axis1=1, axis2=2)
            terms += (np.sum(own * own, axis=(1, 2)) + trace**2) / nu
    exact = float(np.sqrt(chdtri(2, 1.0 - level)))
    nu = 6.0 / np.where(terms > 0.0, terms, 1.0)
    return np.where(terms > 0.0, np.sqrt(2.0 * fdtri(2.0, nu, level)), exact)


def change_of_share(families: Sequence[Family], directions: Sequence[Array], k: Array) -> Array:
    """Change (P,) of the share held by the ellipse, from the fourth cumulants of bounded latents.

    With β the excess of E r⁴ over the normal 8, the density of r² is that of χ²₂ times 1 + (β/8) L₂(r²/2),
    L₂ Laguerre's polynomial, so the share changes by (β/8)·e^{−x} (x − x²/2), x = k²/2.
    """
    excess = np.zeros(k.size)
    for family, one in zip(families, directions, strict=True):
        if family.shape is not Shape.NORMAL:
            fourth = 24.0 * log_coefficients(family.shape, family.top)[0]
            excess += fourth * np.sum(np.sum(one**2, axis=1) ** 2, axis=1)
    x = 0.5 * k * k
    return np.asarray(excess / 8.0 * np.exp(-x) * (x - 0.5 * x * x))


def drawn_factor(
    families: Sequence[Family], directions: Sequence[Array], point: int, level: float, seed: int
) -> float:
    """k as the quantile of the distance of draws of the latents, each in its own shape.

    A point is a question of its own: latents of one shape take the columns of one pool in turn.
    """
    total = np.zeros((DRAWS, 2))
    rest = np.zeros((2, 2))
    used: dict[tuple[Shape, float], int] = {}
    generator = fresh()
    for number, (family, one) in enumerate(zip(families, directions, strict=True)):
        factor_ = scale(generator, family, point, seed, DRAWS, 0)
        column = 1.0 if factor_ is None else factor_[:, None]
        large = np.sqrt(np.sum(one**2, axis=0)) > LARGE
        if family.shape is Shape.NORMAL:
            large[:] = False
        small = one[:, ~large] @ one[:, ~large].T
        if factor_ is None:
            rest += small
        elif small.any():
            total += column * (_pool(seed, Shape.NORMAL, 0.0, 1 + number) @ _root(small))
        if large.any():
            start = used.get((family.shape, family.top), 0)
            stop = used[family.shape, family.top] = start + int(large.sum())
            xi = np.concatenate(
                [_pool(seed, family.shape, family.top, i) for i in range(start // 2, -(-stop // 2))], axis=1
            )
            offset = start % 2
            total += column * (xi[:, offset : offset + stop - start] @ one[:, large].T)
    total += _pool(seed, Shape.NORMAL, 0.0, 0) @ _root(rest)
    return float(np.sqrt(np.quantile(np.sum(total**2, axis=1), level)))


@lru_cache(maxsize=128)
def _pool(seed: int, shape: Shape, top: float, number: int) -> Array:
    """Two columns of standardised draws (N, 2), read-only."""
    generator = keyed(fresh(), seed, "region", shape, top, number)
    drawn = fill(generator, shape, top, np.empty((DRAWS, 2)))
    drawn.setflags(write=False)
    return drawn


def _root(covariance: Array) -> Array:
    """A with Aᵀ A = covariance (2, 2)."""
    values, vectors = np.linalg.eigh(covariance)
    return np.asarray((vectors * np.sqrt(np.maximum(values, 0.0))).T)


def _by_trials(reduced: Reduced, point: int, pair: tuple[int, int]) -> tuple[Array, Array, float] | None:
    """Mean, covariance and k of joint trials of the equation; None where trials are refused."""
    problem, intervals = reduced.assembled.problem, reduced.campaign.intervals
    y = sample(problem, slice(point, point + 1), intervals.seed, 0)[0][:, list(pair)]
    if not np.all(np.isfinite(y)):
        return None
    mean = y.mean(axis=0)
    covariance = np.cov(y.T)
    try:
        distance = np.sum((y - mean) * np.linalg.solve(covariance, (y - mean).T).T, axis=1)
    except np.linalg.LinAlgError:
        return None
    k = float(np.sqrt(np.quantile(distance, intervals.level)))
    return mean, covariance, k
