"""Local slopes of the coefficients in angle and Mach number at every point, with their uncertainty.

In angle: of the parabola through the three nearest angles of the point's own polar (run, config and Mach
number), else of its config over all runs. In Mach number: of points of the config at the same angle where
there are such, else by the Prandtl-Glauert rule, C M/(1 − M²), with half its size in doubt either way.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.symbols import MEASURED
from tapband.questions.latents import Latents
from tapband.questions.pairing import Node, nodes_of, slope_at
from tapband.questions.polars import MACH_GAP
from tapband.questions.sides import Side

Array = NDArray[np.float64]
COUNT = len(MEASURED)
DOUBT = 0.5
"""Half-width of what the Prandtl-Glauert slope may err, as a part of itself."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LocalSlopes:
    """∂C/∂alpha [per rad] and ∂C/∂M of the measured coefficients (P, 5), and their u; NaN: none."""

    alpha: Array
    alpha_u: Array
    mach: Array
    mach_u: Array

    def part(self, points: slice) -> LocalSlopes:
        """Those of a block of points."""
        return LocalSlopes(
            alpha=self.alpha[points],
            alpha_u=self.alpha_u[points],
            mach=self.mach[points],
            mach_u=self.mach_u[points],
        )


def local_slopes(latents: Latents, same_angle: float) -> LocalSlopes:
    """The slopes of every point; angles within ``same_angle`` [rad] are one."""
    size = len(latents.keys)
    alpha, alpha_u = np.full((2, size, COUNT), np.nan)
    random = _random_variance(latents)
    for points in _families(latents):
        side = Side(kind="run", name="", points=tuple(points))
        line = nodes_of(latents, side, same_angle)
        for i in points:
            if np.isnan(alpha[i, 0]):
                found = _in_angle(latents, line, i, random)
                if found is not None:
                    alpha[i], alpha_u[i] = found
    mach, mach_u = _in_mach(latents, same_angle, random)
    return LocalSlopes(alpha=alpha, alpha_u=alpha_u, mach=mach, mach_u=mach_u)


def _families(latents: Latents) -> list[list[int]]:
    """Points by run and config, then by config alone."""
    by_pair: dict[tuple[str, str], list[int]] = {}
    by_config: dict[str, list[int]] = {}
    for i, (run, config) in enumerate(zip(latents.runs, latents.configs, strict=True)):
        if np.all(np.isfinite(latents.estimate[i, :COUNT])):
            by_pair.setdefault((run, config), []).append(i)
            by_config.setdefault(config, []).append(i)
    return [*by_pair.values(), *by_config.values()]


def _random_variance(latents: Latents) -> Array:
    """(P, 5) variance of the coefficients from sources drawn anew at every point."""
    total = np.zeros((len(latents.keys), COUNT))
    for s in np.flatnonzero(latents.random).tolist():
        total += np.sum(latents.sensitivity[s][:, :COUNT] ** 2, axis=2)
    return total


def _in_angle(
    latents: Latents, line: Sequence[Node], point: int, random: Array
) -> tuple[Array, Array] | None:
    """Slope (5,) per rad and its standard uncertainty.

    The latter from the random part of the points used, and from what a third of the change of slope between
    them would be: the parabola's own error.
    """
    at = Node(points=(point,), alpha=float(latents.alpha[point]), mach=float(latents.mach[point]))
    slope = slope_at(line, at)
    if slope is None:
        return None
    values = np.stack([latents.estimate[list(node.points), :COUNT].mean(axis=0) for node in slope.nodes])
    noise = np.stack([random[list(node.points)].sum(axis=0) / len(node.points) ** 2 for node in slope.nodes])
    found = slope.weights @ values
    angles = np.array([node.alpha for node in slope.nodes])
    secants = np.diff(values, axis=0) / np.diff(angles)[:, None]
    bend = np.abs(np.diff(secants, axis=0)).max(axis=0, initial=0.0) if len(secants) > 1 else np.abs(found)
    return found, np.sqrt((slope.weights**2) @ noise + (bend / 3.0) ** 2 / 3.0)


def _in_mach(latents: Latents, same_angle: float, random: Array) -> tuple[Array, Array]:
    """Slopes (P, 5) in Mach number and their standard uncertainties."""
    m = latents.mach[:, None]
    slope = latents.estimate[:, :COUNT] * m / (1.0 - m * m)
    u = DOUBT * np.abs(slope) / np.sqrt(3.0)
    configs = np.array(latents.configs, dtype=object)
    order = np.argsort(latents.mach, kind="stable")
    for i in range(len(latents.keys)):
        near = order[
            (configs[order] == configs[i]) & (np.abs(latents.alpha[order] - latents.alpha[i]) <= same_angle)
        ]
        near = near[np.isfinite(latents.estimate[near, 0])]
        x = latents.mach[near]
        if x.size < 2 or np.ptp(x) < MACH_GAP:
            continue
        nearest = near[np.argsort(np.abs(x - latents.mach[i]), kind="stable")]
        far = nearest[np.abs(latents.mach[nearest] - latents.mach[i]) >= MACH_GAP][:1]
        if far.size:
            step = float(latents.mach[far[0]] - latents.mach[i])
            rise = latents.estimate[far[0], :COUNT] - latents.estimate[i, :COUNT]
            slope[i] = rise / step
            spread = np.sqrt(random[far[0]] + random[i]) / abs(step)
            u[i] = np.sqrt(spread**2 + (DOUBT * slope[i]) ** 2 / 3.0)
    return slope, u
