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
from tapband.questions.bent import bent
from tapband.questions.latents import Latents
from tapband.reduction import Reduced

Array = NDArray[np.float64]
PAIRS = (("cl", "cd_pressure"), ("cl", "cm"))
DRAWS = 20_000
SAME, SLIGHT = 0.001, 0.01
"""Differences in the share held, by the fourth cumulants, up to which k stands, and is corrected by them."""
LARGE = 0.05
"""Bounded latents of a smaller part in any direction count as normal."""
LINEARISED, CUMULANTS, SHAPES, TRIALS = (
    "ellipse, linearised",
    "ellipse, linearised, k for the shapes of the errors",
    "ellipse, Monte Carlo of the errors",
    "ellipse, Monte Carlo of the equation",
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
    """The regions of every point and pair that has one."""
    found = []
    curved = bent(reduced)
    for p in range(len(latents.keys)):
        for names in PAIRS:
            i, j = (latents.outputs.index(name) for name in names)
            covariance = reduced.linear.covariance[p][np.ix_((i, j), (i, j))]
            if np.all(np.isfinite(covariance)):
                found.append(_region(reduced, latents, p, (i, j), covariance, curved[p]))
    return found


def _region(
    reduced: Reduced,
    latents: Latents,
    point: int,
    pair: tuple[int, int],
    covariance: Array,
    curved: NDArray[np.bool_],
) -> Region:
    level, families = reduced.campaign.intervals.level, reduced.assembled.problem.families
    names = (latents.outputs[pair[0]], latents.outputs[pair[1]])
    centre = (float(latents.estimate[point, pair[0]]), float(latents.estimate[point, pair[1]]))
    if np.any(curved[list(pair)]):
        drawn = _by_trials(reduced, point, pair)
        if drawn is not None:
            return Region(
                point=point, a=names[0], b=names[1], centre=drawn[0], covariance=drawn[1], k=drawn[2],
                method=TRIALS,
            )  # fmt: skip
    directions = _whitened(latents, point, pair, covariance)
    k, method = factor(directions, latents.dof[:, point], level), LINEARISED
    change = change_of_share(families, directions, k)
    if abs(change) > SLIGHT:
        seed = reduced.campaign.intervals.seed
        k, method = drawn_factor(families, directions, point, level, seed), SHAPES
    elif abs(change) > SAME:
        # The density of r² at k² is ½ exp(−k²/2).
        k, method = float(np.sqrt(k * k - 2.0 * change * np.exp(0.5 * k * k))), CUMULANTS
    return Region(
        point=point, a=names[0], b=names[1], centre=centre, covariance=covariance, k=k, method=method
    )


def _whitened(latents: Latents, point: int, pair: tuple[int, int], covariance: Array) -> list[Array]:
    """(2, G) a source: sensitivities in the metric in which the covariance is the unit matrix."""
    values, vectors = np.linalg.eigh(covariance)
    scale_ = np.where(values > 1e-14 * max(float(values[-1]), 0.0), values, np.inf)
    metric = (vectors / np.sqrt(scale_)).T
    return [metric @ s[point][list(pair)] for s in latents.sensitivity]


def factor(directions: Sequence[Array], dof: Array, level: float) -> float:
    """k of the linearised ellipse; ``directions`` (2, G) a source, whitened, ``dof`` (S,)."""
    terms = 0.0
    for one, nu in zip(directions, dof, strict=True):
        if np.isfinite(nu):
            own = one @ one.T
            terms += (np.trace(own @ own) + np.trace(own) ** 2) / nu
    if terms == 0.0:
        return float(np.sqrt(chdtri(2, 1.0 - level)))
    return float(np.sqrt(2.0 * fdtri(2.0, 6.0 / terms, level)))


def change_of_share(families: Sequence[Family], directions: Sequence[Array], k: float) -> float:
    """Change of the share held by the ellipse, from the fourth cumulants of bounded latents.

    With β the excess of E r⁴ over the normal 8, the density of r² is that of χ²₂ times 1 + (β/8) L₂(r²/2),
    L₂ Laguerre's polynomial, so the share changes by (β/8)·e^{−x} (x − x²/2), x = k²/2.
    """
    excess = 0.0
    for family, one in zip(families, directions, strict=True):
        if family.shape is not Shape.NORMAL:
            excess += (
                24.0
                * log_coefficients(family.shape, family.top)[0]
                * float(np.sum(np.sum(one**2, axis=0) ** 2))
            )
    x = 0.5 * k * k
    return excess / 8.0 * float(np.exp(-x)) * (x - 0.5 * x * x)


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


def _by_trials(
    reduced: Reduced, point: int, pair: tuple[int, int]
) -> tuple[tuple[float, float], Array, float] | None:
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
    return (float(mean[0]), float(mean[1])), covariance, k
