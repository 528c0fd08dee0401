"""Repeats: what they scatter, against what the sources that change between them predict.

Repeats are points of one config, Mach number and angle (within a tolerance), of one run or of several. They
are brought to their mean angle by the local slope of their polar, and sources that all of them share play no
part: a test against the full uncertainty would pass almost anything.

With contrasts z = Qᵀy of n repeats and V their covariance from the sources that change, χ² = zᵀ(QᵀVQ)⁻¹z has
n − 1 degrees of freedom; where V is itself known to ν of them, χ²/(n − 1) is F(n − 1, ν).

*Source* R. Kacker, R. Kessel, K.-D. Sommer, J. Res. NIST 115 (2010) 453, from memory.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import block_diag, helmert, solve_triangular
from scipy.special import chdtrc, fdtrc

from tapband.nouns.errors import QuestionError
from tapband.questions.latents import Latents
from tapband.questions.pairing import Node, nodes_of, slope_at
from tapband.questions.sides import Side

Array = NDArray[np.float64]
Codes = NDArray[np.int64]
MEASURED = 5
"""Coefficients judged: those as measured."""
POOLED = 400
"""Most repeats with errors in common that are judged: their covariance is formed."""
TINY = 1e-9
"""Part of the largest predicted variance under which a contrast is not predicted at all."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Repeats:
    """One coefficient at one angle, or at several together (alpha NaN); standard deviations, NaN: none."""

    config: str
    points: tuple[int, ...]
    alpha: float
    coefficient: str
    scatter: float
    predicted: float
    dof: int
    chi2: float
    p: float
    within: float
    """Pooled scatter within runs, with its degrees of freedom."""
    within_dof: int
    between: float
    """Scatter of the means of runs."""
    between_dof: int
    moved: bool
    """Whether the angles were brought together; False where no slope is known and they differ."""
    sources: tuple[str, ...]
    """Those that change between these repeats."""
    verdict: str


def repeats(latents: Latents, within: float, level: float) -> list[Repeats]:
    """Every angle that was repeated, by config, a row a coefficient; angles ``within`` [rad] are one.

    Where several angles were, rows of all of them together follow.
    """
    found = []
    for config in dict.fromkeys(latents.configs):
        points = tuple(i for i, each in enumerate(latents.configs) if each == config)
        line = nodes_of(latents, Side(kind="config", name=config, points=points), within)
        repeated = [node for node in line if len(node.points) > 1]
        for node in repeated:
            found += _judged(latents, config, [node], line, level)
        if len(repeated) > 1:
            found += _judged(latents, config, repeated, line, level)
    return found


def repeats_of(latents: Latents, names: Sequence[str], within: float, level: float) -> list[Repeats]:
    """The repeats that a user names; a question error where they are none."""
    points = [latents.index(name) for name in names]
    if len(set(points)) < 2:
        raise QuestionError(
            f"repeats: need two points or more; got {len(set(points))}; name every repeat of one angle"
        )
    configs = dict.fromkeys(latents.configs[i] for i in points)
    if len(configs) > 1:
        raise QuestionError(
            f"repeats: must be of one config; got {', '.join(configs)}; compare configs instead"
        )
    alpha = np.degrees(latents.alpha[points])
    if np.ptp(alpha) > np.degrees(within) * (1.0 + 1e-9):
        raise QuestionError(
            f"repeats: must be of one angle, within {np.degrees(within):g} deg; "
            f"got {alpha.min():.3f} to {alpha.max():.3f} deg; name repeats of one angle, or widen same_angle"
        )
    config = next(iter(configs))
    everyone = tuple(i for i, each in enumerate(latents.configs) if each == config)
    line = nodes_of(latents, Side(kind="config", name=config, points=everyone), within)
    node = Node(
        points=tuple(sorted(set(points))),
        alpha=float(np.mean(latents.alpha[points])),
        mach=float(np.mean(latents.mach[points])),
    )
    return _judged(latents, config, [node], line, level)


def _judged(
    latents: Latents, config: str, nodes: Sequence[Node], line: Sequence[Node], level: float
) -> list[Repeats]:
    """A row a coefficient of one repeated angle, or of several together."""
    points = np.concatenate([np.array(node.points) for node in nodes])
    sizes = [len(node.points) for node in nodes]
    known = [_rate(latents, line, node) for node in nodes]
    rate = np.repeat([np.zeros(len(latents.outputs)) if r is None else r for r in known], sizes, axis=0)
    apart = latents.alpha[points] - np.repeat([node.alpha for node in nodes], sizes)
    y = latents.estimate[points] - apart[:, None] * rate
    alike = [
        r is not None or float(np.ptp(latents.alpha[list(n.points)])) < 1e-12
        for r, n in zip(known, nodes, strict=True)
    ]
    together = _Together(
        config=config,
        points=points,
        alpha=nodes[0].alpha if len(nodes) == 1 else float("nan"),
        angle=np.repeat(np.arange(len(nodes)), sizes),
        moved=all(alike),
    )
    return [
        _one(latents, together, j, y[:, j], rate[:, j], level)
        for j in range(MEASURED)
        if np.all(np.isfinite(y[:, j]))
    ]


def _rate(latents: Latents, line: Sequence[Node], node: Node) -> Array | None:
    """∂y/∂alpha (m,) per rad at a node; None where its polar has one angle alone."""
    slope = slope_at(line, node)
    if slope is None:
        return None
    values = np.stack([latents.estimate[list(other.points)].mean(axis=0) for other in slope.nodes])
    return np.asarray(slope.weights @ values)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Together:
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


def _one(latents: Latents, together: _Together, output: int, y: Array, rate: Array, level: float) -> Repeats:
    points, dof = together.points, together.dof
    parts = _changing(latents, points, output, rate)
    diagonal = np.sum([part.diagonal for part in parts], axis=0) if parts else np.zeros(y.size)
    shared = [part for part in parts if part.shared]
    many = bool(shared) and y.size > POOLED
    covariance = None
    if shared and not many:
        covariance = np.diag(diagonal)
        for part in shared:
            covariance += part.off_diagonal
    traces = [together.trace(p.diagonal, p.covariance if p.shared and not many else None) for p in parts]
    predicted = float(np.sqrt(max(sum(traces), 0.0) / dof))
    scatter = float(np.sqrt(np.sum(together.centred(y) ** 2) / dof))
    chi2, p = float("nan"), float("nan")
    if not many:
        reached, kept = _distance(together, y, diagonal, covariance)
        chi2, p = reached, _probability(reached, kept, _freedom(traces, [part.nu for part in parts]))
    runs = np.array([latents.runs[i] for i in points], dtype=object)
    inside, inside_dof, across, across_dof = _by_run(y, runs, together.angle)
    return Repeats(
        config=together.config,
        points=tuple(points.tolist()),
        alpha=together.alpha,
        coefficient=latents.outputs[output],
        scatter=scatter,
        predicted=predicted,
        dof=dof,
        chi2=chi2,
        p=p,
        within=inside,
        within_dof=inside_dof,
        between=across,
        between_dof=across_dof,
        moved=together.moved,
        sources=tuple(part.name for part in parts),
        verdict=verdict(scatter, predicted, p, level),
    )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Part:
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


def _changing(latents: Latents, points: Codes, output: int, rate: Array) -> list[_Part]:
    """The sources that change between the points.

    An error of angle acts along the slope too: repeats are made at one angle read, not at one true angle.
    """
    parts = []
    for s, (name, codes) in enumerate(zip(latents.sources, latents.group, strict=True)):
        mine = codes[points]
        if np.all(mine == mine[0]):
            continue
        own = latents.sensitivity[s][points, output]
        if s in latents.on_alpha:
            own = own - rate[:, None] * latents.on_alpha[s][points]
        if np.any(own != 0.0):
            nu = _pooled(own, latents.scale[s][points], latents.dof[s, points])
            parts.append(_Part(name=name, own=own, group=mine, nu=nu))
    return parts


def _pooled(own: Array, scale: Codes, dof: Array) -> float:
    """ν of one source's variance summed over points (n,), those of one scale sharing one estimate of it."""
    if np.all(np.isinf(dof)):
        return np.inf
    variance = np.sum(own**2, axis=1)
    codes, first, place = np.unique(scale, return_index=True, return_inverse=True)
    sums = np.bincount(place.ravel(), variance, codes.size)
    return float(np.sum(sums) ** 2 / np.sum(sums**2 / dof[first]))


def _freedom(traces: Sequence[float], nus: Sequence[float]) -> float:
    """ν of the predicted variance (Welch-Satterthwaite) from that of each source."""
    terms = sum(trace**2 / nu for trace, nu in zip(traces, nus, strict=True))
    return sum(traces) ** 2 / terms if terms > 0.0 else np.inf


def _probability(chi2: float, dof: int, nu: float) -> float:
    """Of so large a χ² by chance; 0 where scatter is seen and none predicted."""
    if dof == 0 or np.isinf(chi2):
        return float(np.isfinite(chi2))
    return float(chdtrc(dof, chi2) if np.isinf(nu) else fdtrc(dof, nu, chi2 / dof))


def _distance(together: _Together, y: Array, diagonal: Array, covariance: Array | None) -> tuple[float, int]:
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


def _by_run(y: Array, runs: NDArray[np.object_], angle: Codes) -> tuple[float, int, float, int]:
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


def verdict(scatter: float, predicted: float, p: float, level: float) -> str:
    """What the test says, in words."""
    if predicted == 0.0 and scatter <= 1e-12:
        return "no source changes between these repeats, and they do not scatter"
    if predicted == 0.0:
        return "they scatter, and no declared source changes between them: a source is missing"
    if np.isnan(p):
        return f"not judged: more than {POOLED} repeats share errors"
    if p < 1.0 - level:
        return "more scatter than the sources that change predict: one is missing or too small"
    if p > level:
        return "less scatter than the sources that change predict: their sizes may be generous"
    return "as the sources that change predict"
