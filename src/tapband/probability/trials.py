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
from tapband.nouns.source import Shape
from tapband.probability.distributions import half_width, log_coefficients, variance
from tapband.probability.draws import block, scales
from tapband.probability.model import Model
from tapband.probability.smoothing import Base, Integrated, Line, NormalBase, ShapeBase, Smoothing
from tapband.probability.strategy import Direction

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
    model: Model, points: range, rows: Mask, out: tuple[int, ...], base: Base, tiles: Tiles
) -> Trials:
    """Trials in which the families ``out`` are integrated out; other rows than ``rows`` (Pb, m) hold nothing."""
    drawn = isinstance(base, NormalBase)
    parts = [_integrated_tile(model, points, out, drawn, tiles, tile) for tile in tiles.numbers()]
    y, l, s2, s02, gain = (tiles.joined(column) for column in zip(*parts, strict=True))
    refused = rows & ~np.isfinite(y + s2).all(axis=-1)
    good = (rows & ~refused)[..., None]
    y0 = model.estimate[points.start : points.stop, :, None]
    away, away0 = np.where(good, y - y0, 0.0), np.where(good, l - y0, 0.0)
    y0 = np.where(good, y0, 0.0)
    smoothing = Integrated(
        base=base,
        y=y0 + away,
        s=np.sqrt(np.where(good, s2, 1.0)),
        l=y0 + away0,
        s0=np.sqrt(np.where(good, s02, 1.0)),
    )
    square = (away - away0) * (away + away0) + np.where(good, gain, 0.0)
    return Trials(smoothing=smoothing, shift=away - away0, square=square, refused=refused)


def _integrated_tile(
    model: Model, points: range, out: tuple[int, ...], drawn: bool, tiles: Tiles, tile: int
) -> tuple[Array, ...]:
    """y, l, the variances s² and s0² that ``out`` adds to each, and the gain in mean variance; (Pb, T, m)."""
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
    return np.broadcast_to(y, shape), linear_values(model, points, draws, tiles.size), s2, s02, gain


def linear_values(model: Model, points: range, draws: Draws, size: int) -> Array:
    """The linear model (Pb, T, m) at draws."""
    where = slice(points.start, points.stop)
    estimate = model.estimate[where]
    total = np.repeat(np.where(np.isnan(estimate), 0.0, estimate)[:, None, :], size, axis=1)
    for f, xi in draws.items():
        total += xi @ np.swapaxes(model.sensitivity[f][where], -1, -2)
    return total


def line(model: Model, points: range, rows: Mask, along: Sequence[Direction], tiles: Tiles) -> Trials:
    """Trials in which one direction a point is integrated out, numerically; directions of one key."""
    parts = [_line_tile(model, points, along, tiles, tile) for tile in tiles.numbers()]
    y, l, l_line, slope, below, middle, above, eta = (tiles.joined(c) for c in zip(*parts, strict=True))
    refused = rows & ~np.isfinite(y + below + middle + above).all(axis=-1)
    good = (rows & ~refused)[..., None]
    y0 = np.where(good, model.estimate[points.start : points.stop, :, None], 0.0)
    y, l, l_line, below, middle, above = (
        np.where(good, values, 0.0) for values in (y, l, l_line, below, middle, above)
    )
    reach = along[0].reach
    b = (above - below) / (2.0 * reach)
    c = (above + below - 2.0 * middle) / (2.0 * reach * reach)
    smoothing = Line(
        base=NormalBase() if along[0].shape is Shape.NORMAL else ShapeBase(along[0].shape, along[0].top),
        a=middle,
        b=b,
        c=c,
        y=y,
        fitted=middle + eta * (b + eta * c),
        l=l_line,
        slope=np.where(good, np.abs(slope), 1.0),
    )
    away, away0 = y - y0, l - y0
    return Trials(smoothing=smoothing, shift=y - l, square=(away - away0) * (away + away0), refused=refused)


def _line_tile(
    model: Model, points: range, along: Sequence[Direction], tiles: Tiles, tile: int
) -> tuple[Array, ...]:
    """y, l, l and ∂l/∂η at η = 0 of the line, y at its three nodes, η of the trial; (Pb, T, m)."""
    where = slice(points.start, points.stop)
    shape = (len(points), tiles.size, model.estimate.shape[1])
    every = range(len(model.families))
    draws = dict(block(model.families, every, points, tiles.seed, tile, tiles.size))
    used = [f for f, _ in along[0].parts]
    factors = scales(model.families, used, points, tiles.seed, tile, tiles.size)
    eta, slope = np.zeros((*shape[:2], 1)), np.zeros(shape)
    step: dict[int, Array] = {}
    for place, f in enumerate(used):
        unit = np.stack([one.parts[place][1] for one in along])[:, :, None]
        root = np.sqrt(factors[f])[..., None] if f in factors else np.ones((1, 1, 1))
        eta += (draws[f] @ unit) / root
        slope += (model.sensitivity[f][where] @ unit)[:, None, :, 0] * root
        step[f] = root * np.swapaxes(unit, -1, -2)
    values = [model.problem.evaluate(where, draws)]
    for node in (-along[0].reach, 0.0, along[0].reach):
        moved = {f: draws[f] + (node - eta) * step[f] for f in used}
        values.append(model.problem.evaluate(where, {**draws, **moved}))
    y, below, middle, above = (np.broadcast_to(v, shape) for v in values)
    l = linear_values(model, points, draws, tiles.size)
    return y, l, l - eta * slope, slope, below, middle, above, np.broadcast_to(eta, shape)


def probe(model: Model, points: range, distance: float = 3.0) -> tuple[Array, Array]:
    """y and l (Pb, 2m, m) at ± ``distance`` standard deviations along each output's own gradient.

    Bounded latents stop at their bounds. A cliff that few trials would meet shows here.
    """
    where = slice(points.start, points.stop)
    unit = np.where(model.live[where], model.u[where], np.inf)[..., None]
    draws: dict[int, Array] = {}
    for f, family in enumerate(model.families):
        along = distance * model.sensitivity[f][where] / unit
        both = np.concatenate([along, -along], axis=1)
        bound = half_width(family.shape, family.top)
        draws[f] = np.clip(both, -bound, bound)
    y = model.problem.evaluate(where, draws)
    return y, linear_values(model, points, draws, y.shape[1])


def shape_error(
    model: Model, points: range, out: tuple[int, ...], tiles: Tiles, draws_used: int = 4
) -> Array:
    """How far (Pb, m) the law of ``out`` may be from scaling as a whole, as a shift of an end in units of u.

    Given the other latents the outputs are affine in ``out``: unit steps give every sensitivity exactly, and
    with them the fourth cumulant, which is compared with that of the nominal law brought to the same variance.
    """
    where = slice(points.start, points.stop)
    inside = [f for f in range(len(model.families)) if f not in out]
    few = {
        f: xi[:, :draws_used]
        for f, xi in block(model.families, inside, points, tiles.seed, 0, tiles.size).items()
    }
    counts = [len(model.families[f].members) for f in out]
    steps = 1 + sum(counts)
    repeated: dict[int, Array] = {f: np.repeat(xi, steps, axis=1) for f, xi in few.items()}
    start = 1
    for f, count in zip(out, counts, strict=True):
        one = np.zeros((steps, count))
        one[start : start + count] = np.eye(count)
        repeated[f] = np.tile(one, (draws_used, 1))[None]
        start += count
    y = model.problem.evaluate(where, repeated)
    y = np.broadcast_to(y, (len(points), *y.shape[1:])).reshape(len(points), draws_used, steps, -1)
    slopes = np.moveaxis(y[:, :, 1:] - y[:, :, :1], -1, 1)
    nominal = np.concatenate([model.sensitivity[f][where] for f in out], axis=-1)[:, :, None, :]
    weight = np.repeat([_fourth(model, f) for f in out], counts)
    ratio = (slopes**2).sum(axis=-1) / np.where(model.live[where][..., None], (nominal**2).sum(axis=-1), 1.0)
    there, here = (weight * slopes**4).sum(axis=-1), (weight * nominal**4).sum(axis=-1) * ratio**2
    unit = np.where(model.live[where], model.u[where], np.inf)
    # Edgeworth: an end z moves by κ4 (z³ − 3z)/24; 0.3 covers levels up to 0.999.
    return 0.3 * np.abs(there - here).mean(axis=-1) / unit**4


def _fourth(model: Model, f: int) -> float:
    """Excess kurtosis of a family's latents."""
    family = model.families[f]
    return 24.0 * log_coefficients(family.shape, family.top)[0]
