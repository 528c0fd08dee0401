"""Trials of the accelerated engine: tiles of draws turned into what a smoothing needs.

Trials come in tiles of fixed size, one call of the problem a tile and node, so that arrays of one shape reach
every matrix product whatever the number of trials.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Draws
from tapband.nouns.source import Shape
from tapband.probability.controls import COORDINATES, PAIRS, Coordinates, controls_of, coordinates
from tapband.probability.distributions import gauss_rule, half_width, log_coefficients, variance
from tapband.probability.draws import block, scales
from tapband.probability.model import Model
from tapband.probability.smoothing import Base, Integrated, Line, Normal, NormalBase, ShapeBase, Smoothing
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
    controls: Array
    """(Pb, K, N) variates whose mean is known to be 0."""
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
    y, l, s2, s02, gain, x = (tiles.joined(column) for column in zip(*parts, strict=True))
    refused = rows & ~np.isfinite(y + s2).all(axis=-1)
    good = (rows & ~refused)[..., None]
    y0 = model.estimate[points.start : points.stop, :, None]
    away, away0 = np.where(good, y - y0, 0.0), np.where(good, l - y0, 0.0)
    y0 = np.where(good, y0, 0.0)
    laws = {
        "y": y0 + away,
        "s": np.sqrt(np.where(good, s2, 1.0)),
        "l": y0 + away0,
        "s0": np.sqrt(np.where(good, s02, 1.0)),
    }
    smoothing = Normal(**laws) if base is None else Integrated(base=base, **laws)
    square = (away - away0) * (away + away0) + np.where(good, gain, 0.0)
    controls = controls_of(x, axes.wave, np.zeros((len(points), PAIRS)))
    return Trials(smoothing=smoothing, shift=away - away0, square=square, controls=controls, refused=refused)


def _integrated_tile(
    model: Model, points: range, out: tuple[int, ...], axes: Coordinates, drawn: bool, tiles: Tiles, tile: int
) -> tuple[Array, ...]:
    """y, l, the variances s² and s0² that ``out`` adds to each, the gain in mean variance (Pb, T, m); coordinates."""
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
    roots = _roots(model, tuple(axes.units), points, tiles, tile)
    x = axes.values(draws, roots, tiles.size)
    return np.broadcast_to(y, shape), linear_values(model, points, draws, tiles.size), s2, s02, gain, x


def _roots(model: Model, which: Sequence[int], points: range, tiles: Tiles, tile: int) -> dict[int, Array]:
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


def line(model: Model, points: range, rows: Mask, along: Sequence[Direction], tiles: Tiles) -> Trials:
    """Trials in which one direction a point is integrated out, numerically; directions of one key.

    Moments are taken along the line by its Gauss rule, so that they are means of conditional means.
    """
    shape, top = along[0].shape, along[0].top
    nodes, weights = gauss_rule(shape, top)
    axes = coordinates(model, points, range(len(model.families)))
    parts = [_line_tile(model, points, along, axes, nodes, tiles, tile) for tile in tiles.numbers()]
    y, l_line, slope, eta, x, *at = (tiles.joined(column) for column in zip(*parts, strict=True))
    values = np.stack(at)
    refused = rows & ~(np.isfinite(values).all(axis=0) & np.isfinite(y)).all(axis=-1)
    good = (rows & ~refused)[..., None]
    y0 = np.where(good, model.estimate[points.start : points.stop, :, None], 0.0)
    y, l_line, values = (np.where(good, part, 0.0) for part in (y, l_line, values))
    slope = np.where(good, np.abs(slope), 1.0)
    quartic = np.linalg.inv(np.vander(nodes, increasing=True))
    parabola = np.linalg.solve(*_normal_equations(nodes, weights))
    away, away0 = values - y0, l_line - y0
    gain = away - away0
    linear = away0 + nodes[:, None, None, None] * np.where(good, slope, 0.0)
    weight = weights[:, None, None, None]
    return Trials(
        smoothing=Line(
            base=NormalBase() if shape is Shape.NORMAL else ShapeBase(shape, top),
            powers=_combined(quartic, values),
            parabola=_combined(parabola, values),
            inside=1.1 * float(nodes[-1]),
            eta=eta[:, :1],
            y=y,
            l=l_line,
            slope=slope,
        ),
        shift=(weight * gain).sum(axis=0),
        square=(weight * (away - linear) * (away + linear)).sum(axis=0),
        controls=_beside_line(x, eta[:, :1], axes, along),
        refused=refused,
    )


def _combined(matrix: Array, values: Array) -> Array:
    """matrix (k, 5) times values (5, ...), term by term: a matrix product would round by its shape."""
    result = np.empty((len(matrix), *values.shape[1:]))
    for row, out in zip(matrix, result, strict=True):
        np.multiply(row[0], values[0], out=out)
        for factor, value in zip(row[1:], values[1:], strict=True):
            out += factor * value
    return result


def _normal_equations(nodes: Array, weights: Array) -> tuple[Array, Array]:
    """Of the parabola nearest in the mean over the law of the line: (3, 3) and (3, 5)."""
    basis = np.vander(nodes, 3, increasing=True).T
    return (basis * weights) @ basis.T, basis * weights


def _line_tile(
    model: Model,
    points: range,
    along: Sequence[Direction],
    axes: Coordinates,
    nodes: Array,
    tiles: Tiles,
    tile: int,
) -> tuple[Array, ...]:
    """y at the trial; l at η = 0 of its line, ∂l/∂η; η; coordinates; y at the nodes. (Pb, T, ·)."""
    where = slice(points.start, points.stop)
    shape = (len(points), tiles.size, model.estimate.shape[1])
    every = range(len(model.families))
    draws = dict(block(model.families, every, points, tiles.seed, tile, tiles.size))
    used = [f for f, _ in along[0].parts]
    roots = _roots(model, every, points, tiles, tile)
    eta, slope = np.zeros((*shape[:2], 1)), np.zeros(shape)
    step: dict[int, Array] = {}
    for place, f in enumerate(used):
        unit = np.stack([one.parts[place][1] for one in along])[:, :, None]
        root = roots[f][..., None] if f in roots else np.ones((1, 1, 1))
        eta += (draws[f] @ unit) / root
        slope += (model.sensitivity[f][where] @ unit)[:, None, :, 0] * root
        step[f] = root * np.swapaxes(unit, -1, -2)
    values = [model.problem.evaluate(where, draws)]
    for node in nodes:
        moved = {f: draws[f] + (node - eta) * step[f] for f in used}
        values.append(model.problem.evaluate(where, {**draws, **moved}))
    y, *at = (np.broadcast_to(v, shape) for v in values)
    foot = linear_values(model, points, draws, tiles.size) - eta * slope
    return y, foot, slope, np.broadcast_to(eta, shape), axes.values(draws, roots, tiles.size), *at


def _beside_line(x: Array, eta: Array, axes: Coordinates, along: Sequence[Direction]) -> Array:
    """Controls from coordinates (Pb, c, N) with their share of the line's own coordinate taken out.

    Only the rest of a coordinate can tell what the line does not know; in normal latents it is independent of
    η. A coordinate that lies along the line has no rest.
    """
    parts = [dict(one.parts) for one in along]
    cosine = np.array(
        [
            [float(part[f] @ axes.units[f][p]) if f in part else 0.0 for f in families]
            for p, (part, families) in enumerate(zip(parts, axes.chosen.tolist(), strict=True))
        ]
    )
    rest = 1.0 - cosine * cosine
    alone = rest > 1e-6
    scale = np.sqrt(np.where(alone, rest, 1.0))
    beside = np.where(alone[..., None], (x - cosine[..., None] * eta) / scale[..., None], 0.0)
    slanted = np.where(alone, cosine / scale, 0.0)
    correlation = np.stack(
        [-slanted[:, a] * slanted[:, b] for a, b in combinations(range(COORDINATES), 2)], axis=1
    )
    return controls_of(beside, axes.wave, correlation)


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
