"""Contrasts between repeats: what changing sources predict of them, and how far readings are from it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import block_diag, helmert, solve_triangular
from scipy.special import chdtrc, fdtrc

Array = NDArray[np.float64]
Codes = NDArray[np.int64]
TINY = 1e-9
"""Part of the largest predicted variance under which a contrast is not predicted at all."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Together:
    """Points (n,) judged together, and the number (n,) of the angle of each."""

    config: str
    points: Codes
    alpha: float
    angle: Codes
    moved: bool

    @property
    def dof(self) -> int:
        """Contrasts within the angles."""
        return int(self.angle.size - self.angle.max() - 1)

    def centred(self, values: Array) -> Array:
        """Values (n,) less the mean of their angle."""
        count = np.bincount(self.angle)
        return values - (np.bincount(self.angle, values) / count)[self.angle]

    def trace(self, diagonal: Array, covariance: Array | None) -> float:
        """Trace of a covariance (its diagonal alone where nothing is shared) between the contrasts."""
        count = np.bincount(self.angle)
        total = float(np.sum(diagonal * (1.0 - 1.0 / count[self.angle])))
        if covariance is not None:
            off = covariance - np.diag(diagonal)
            same = self.angle[:, None] == self.angle
            total -= float(np.sum(off * same / count[self.angle]))
        return total


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Part:
    """What one source that changes does to points (n,): sensitivities (n, G), groups (n,) and ν."""

    name: str
    own: Array
    group: Codes
    nu: float

    @property
    def diagonal(self) -> Array:
        """(n,) variances."""
        return np.asarray(np.sum(self.own**2, axis=1))

    @property
    def shared(self) -> bool:
        """Whether some of the points share it."""
        return bool(np.unique(self.group).size < self.group.size)

    @property
    def covariance(self) -> Array:
        """(n, n)."""
        return np.asarray(self.own @ self.own.T * (self.group[:, None] == self.group))

    @property
    def off_diagonal(self) -> Array:
        """(n, n) less its diagonal."""
        return self.covariance - np.diag(self.diagonal)


def freedom(traces: Sequence[float], nus: Sequence[float]) -> float:
    """ν of the predicted variance (Welch-Satterthwaite) from that of each source."""
    terms = sum(trace**2 / nu for trace, nu in zip(traces, nus, strict=True))
    return sum(traces) ** 2 / terms if terms > 0.0 else np.inf


def probability(chi2: float, dof: int, nu: float) -> float:
    """Of so large a χ² by chance; 0 where scatter is seen and none predicted."""
    if dof == 0 or np.isinf(chi2):
        return float(np.isfinite(chi2))
    return float(chdtrc(dof, chi2) if np.isinf(nu) else fdtrc(dof, nu, chi2 / dof))


def distance(together: Together, y: Array, diagonal: Array, covariance: Array | None) -> tuple[float, int]:
    """χ² of the contrasts and its degrees of freedom.

    Where points share nothing, of the readings about their weighted means; infinite where a contrast is seen
    that no source predicts at all.
    """
    if covariance is None and np.all(diagonal > TINY * np.max(diagonal, initial=1e-300)):
        weight = 1.0 / diagonal
        mean = np.bincount(together.angle, weight * y) / np.bincount(together.angle, weight)
        return float(np.sum(weight * (y - mean[together.angle]) ** 2)), together.dof
    contrasts = block_diag(*[helmert(n) for n in np.bincount(together.angle).tolist()])
    whole = np.diag(diagonal) if covariance is None else covariance
    return _whitened(contrasts @ y, contrasts @ whole @ contrasts.T)


def _whitened(z: Array, covariance: Array) -> tuple[float, int]:
    """zᵀ V⁻¹ z and its degrees of freedom; infinite where z has a part that V does not predict at all."""
    try:
        factor = np.linalg.cholesky(covariance)
    except np.linalg.LinAlgError:
        factor = np.zeros_like(covariance)
    diagonal = np.diag(factor)
    if np.all(diagonal > 1e-4 * np.max(diagonal, initial=1e-300)):
        along = solve_triangular(factor, z, lower=True)
        return float(along @ along), z.size
    values, vectors = np.linalg.eigh(covariance)
    along = vectors.T @ z
    kept = values > TINY * max(float(values[-1]), 0.0)
    if np.any(np.abs(along[~kept]) > 1e-12):
        return float("inf"), z.size
    return float(np.sum(along[kept] ** 2 / values[kept])), int(kept.sum())


def by_run(y: Array, runs: NDArray[np.object_], angle: Codes) -> tuple[float, int, float, int]:
    """Pooled scatter within runs, and of the means of runs at one angle, each with degrees of freedom."""
    squares, dofs = np.zeros(2), np.zeros(2, dtype=np.int64)
    for each in np.unique(angle):
        mine, names = y[angle == each], runs[angle == each]
        groups = [mine[names == name] for name in dict.fromkeys(names)]
        means = np.array([group.mean() for group in groups])
        squares += (
            sum(float(np.sum((g - g.mean()) ** 2)) for g in groups),
            np.sum((means - means.mean()) ** 2),
        )
        dofs += mine.size - len(groups), len(groups) - 1
    inside, across = (
        float(np.sqrt(s / d)) if d else float("nan") for s, d in zip(squares, dofs.tolist(), strict=True)
    )
    return inside, int(dofs[0]), across, int(dofs[1])
