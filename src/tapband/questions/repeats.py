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

from tapband.nouns.errors import QuestionError
from tapband.questions.contrasts import Part, Together, by_run, distance, freedom, probability
from tapband.questions.latents import Latents
from tapband.questions.pairing import Node, nodes_of, slope_at
from tapband.questions.sides import Side

Array = NDArray[np.float64]
Codes = NDArray[np.int64]
MEASURED = 5
"""Coefficients judged: those as measured."""
POOLED = 400
"""Most repeats with errors in common that are judged: their covariance is formed."""


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
    together = Together(
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


def _one(latents: Latents, together: Together, output: int, y: Array, rate: Array, level: float) -> Repeats:
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
        reached, kept = distance(together, y, diagonal, covariance)
        chi2, p = reached, probability(reached, kept, freedom(traces, [part.nu for part in parts]))
    runs = np.array([latents.runs[i] for i in points], dtype=object)
    inside, inside_dof, across, across_dof = by_run(y, runs, together.angle)
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


def _changing(latents: Latents, points: Codes, output: int, rate: Array) -> list[Part]:
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
            parts.append(Part(name=name, own=own, group=mine, nu=nu))
    return parts


def _pooled(own: Array, scale: Codes, dof: Array) -> float:
    """ν of one source's variance summed over points (n,), those of one scale sharing one estimate of it."""
    if np.all(np.isinf(dof)):
        return np.inf
    variance = np.sum(own**2, axis=1)
    codes, first, place = np.unique(scale, return_index=True, return_inverse=True)
    sums = np.bincount(place.ravel(), variance, codes.size)
    return float(np.sum(sums) ** 2 / np.sum(sums**2 / dof[first]))


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
