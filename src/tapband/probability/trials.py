"""Trials of the accelerated engine: tiles of draws turned into what a smoothing needs.

Trials come in tiles of fixed size, one call of the problem a tile and node, so that arrays of one shape reach
every matrix product whatever the number of trials.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Draws
from tapband.probability.controls import PAIRS, Coordinates, controls_of, coordinates
from tapband.probability.distributions import variance
from tapband.probability.draws import block, scales
from tapband.probability.model import Model
from tapband.probability.smoothing import Base, Integrated, Normal, Smoothing

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True, kw_only=True)
class Trials:
    """N trials of a block: a smoothing, and differences to the linear model (Pb, m, N)."""

    smoothing: Smoothing
    shift: Array
    """y − l"""
    square: Array
    """Squared distance from the estimate, less that of the linear model."""
    controls: Array
    """(Pb, K, N) variates whose mean is known to be 0."""
    scatter: Array
    """Root mean square (Pb, m) of what the linear model leaves of an output."""
    refused: Mask
    """(Pb, m) whether some trial was refused."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Tiles:
    """Which trials: the first ``count`` of the tiles of ``size`` from tile ``first`` on."""

    seed: int
    size: int
    count: int
    first: int = 0

    def numbers(self) -> Iterator[int]:
        """Numbers of the tiles."""
        return iter(range(self.first, self.first + -(-self.count // self.size)))

    def joined(self, parts: Sequence[Array]) -> Array:
        """Tiles (Pb, T, m) end to end, trials last and contiguous (Pb, m, N)."""
        whole = parts[0] if len(parts) == 1 else np.concatenate(parts, axis=1)
        return np.ascontiguousarray(np.swapaxes(whole[:, : self.count], -1, -2))


def integrated(
    model: Model, points: range, rows: Mask, out: tuple[int, ...], base: Base | None, tiles: Tiles
) -> Trials:
    """Trials in which the families ``out`` are integrated out, in the rows ``rows`` (Pb, m) only.

    ``base`` is their law, None where all are normal; t families then have their scales drawn.
    """
    drawn = base is None
    axes = coordinates(model, points, [f for f in range(len(model.families)) if f not in out])
    parts = [_integrated_tile(model, points, out, axes, drawn, tiles, tile) for tile in tiles.numbers()]
    y, linear, s2, s02, gain, x = (tiles.joined(column) for column in zip(*parts, strict=True))
    refused = rows & ~np.isfinite(y + s2).all(axis=-1)
    good = (rows & ~refused)[..., None]
    y0 = model.estimate[points.start : points.stop, :, None]
    away, away0 = np.where(good, y - y0, 0.0), np.where(good, linear - y0, 0.0)
    y0 = np.where(good, y0, 0.0)
    laws = {
        "y": y0 + away,
        "s": np.sqrt(np.where(good, s2, 1.0)),
        "linear": y0 + away0,
        "s0": np.sqrt(np.where(good, s02, 1.0)),
    }
    smoothing = Normal(**laws) if base is None else Integrated(base=base, **laws)
    square = (away - away0) * (away + away0) + np.where(good, gain, 0.0)
    shift, width = away - away0, laws["s"] - laws["s0"]
    return Trials(
        smoothing=smoothing,
        shift=shift,
        square=square,
        controls=controls_of(x, axes.wave, np.zeros((len(points), PAIRS))),
        scatter=np.sqrt((shift * shift + width * width).mean(axis=-1)),
        refused=refused,
    )


def _integrated_tile(
    model: Model, points: range, out: tuple[int, ...], axes: Coordinates, drawn: bool, tiles: Tiles, tile: int
) -> tuple[Array, ...]:
    """y, the linear model, the variances that ``out`` adds to each, the gain in mean variance (Pb, T, m);
    coordinates (Pb, T, c).
    """
    where = slice(points.start, points.stop)
    inside = [f for f in range(len(model.families)) if f not in out]
    draws = block(model.families, inside, points, tiles.seed, tile, tiles.size)
    factors = scales(model.families, out, points, tiles.seed, tile, tiles.size) if drawn else {}
    shape = (len(points), tiles.size, model.estimate.shape[1])
    y, added = model.problem.given(where, draws, out)
    s2, s02, gain = np.zeros(shape), np.zeros(shape), np.zeros(shape)
    for f in out:
        nominal = (model.share[where, :, f] * model.u[where] ** 2)[:, None, :]
        factor = factors[f][..., None] if f in factors else 1.0
        s2 += added[f] * factor
        s02 += nominal * factor
        # Where the scale is in doubt its mean is known: a moment needs no draw of it.
        gain += (added[f] - nominal) * variance(model.families[f])[where, None, None]
    roots = roots_of(model, tuple(axes.units), points, tiles, tile)
    x = axes.values(draws, roots, tiles.size)
    return np.broadcast_to(y, shape), linear_values(model, points, draws, tiles.size), s2, s02, gain, x


def roots_of(model: Model, which: Sequence[int], points: range, tiles: Tiles, tile: int) -> dict[int, Array]:
    """Common factors (Pb or 1, T) of the families in doubt."""
    squares = scales(model.families, which, points, tiles.seed, tile, tiles.size)
    return {f: np.sqrt(square) for f, square in squares.items()}


def linear_values(model: Model, points: range, draws: Draws, size: int) -> Array:
    """The linear model (Pb, T, m) at draws."""
    where = slice(points.start, points.stop)
    estimate = model.estimate[where]
    total = np.repeat(np.where(np.isnan(estimate), 0.0, estimate)[:, None, :], size, axis=1)
    for f, xi in draws.items():
        total += xi @ np.swapaxes(model.sensitivity[f][where], -1, -2)
    return total
