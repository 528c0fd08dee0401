"""Trials in which one direction through latent space is integrated out, numerically.

All latents are drawn; then the output is evaluated at the Gauss nodes of the line through each trial.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.source import Shape
from tapband.probability.controls import COORDINATES, Coordinates, controls_of, coordinates
from tapband.probability.distributions import gauss_rule
from tapband.probability.draws import block
from tapband.probability.model import Model
from tapband.probability.smoothing import Line, NormalBase, ShapeBase
from tapband.probability.strategy import Direction
from tapband.probability.trials import Tiles, Trials, linear_values, roots_of

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


def line(model: Model, points: range, rows: Mask, along: Sequence[Direction], tiles: Tiles) -> Trials:
    """Trials in which one direction a point is integrated out, numerically; directions of one key.

    Moments are taken along the line by its Gauss rule, exactly for the polynomial through the nodes; what that
    leaves of the trial itself is added, so that they are unbiased.
    """
    shape, top = along[0].shape, along[0].top
    nodes, weights = gauss_rule(shape, top)
    axes = coordinates(model, points, range(len(model.families)))
    parts = [_line_tile(model, points, along, axes, nodes, tiles, tile) for tile in tiles.numbers()]
    y, foot, slope, eta, x, *at = (tiles.joined(column) for column in zip(*parts, strict=True))
    values = np.stack(at)
    refused = rows & ~(np.isfinite(values).all(axis=0) & np.isfinite(y)).all(axis=-1)
    good = (rows & ~refused)[..., None]
    y0 = np.where(good, model.estimate[points.start : points.stop, :, None], 0.0)
    y, foot, values = (np.where(good, part, 0.0) for part in (y, foot, values))
    slope = np.where(good, slope, 1.0)
    quartic = np.asarray(np.linalg.inv(np.vander(nodes, increasing=True)), dtype=np.float64)
    parabola = np.asarray(np.linalg.solve(*_normal_equations(nodes, weights)), dtype=np.float64)
    away, away0 = values - y0, foot - y0
    linear = away0 + nodes[:, None, None, None] * np.where(good, slope, 0.0)
    left, weight = away - linear, weights[:, None, None, None]
    powers = _combined(quartic, values - y0)
    fitted = powers[4]
    for coefficient in powers[3::-1]:
        fitted = coefficient + eta[:, :1] * fitted
    own = y - y0
    return Trials(
        smoothing=Line(
            base=NormalBase() if shape is Shape.NORMAL else ShapeBase(shape, top),
            powers=np.concatenate([powers[:1] + y0, powers[1:]]),
            parabola=_combined(parabola, values),
            inside=1.1 * float(nodes[-1]),
            eta=eta[:, :1],
            y=y,
            linear=foot,
            slope=np.abs(slope),
        ),
        shift=(weight * left).sum(axis=0) + (own - fitted),
        square=(weight * left * (away + linear)).sum(axis=0) + (own - fitted) * (own + fitted),
        controls=_beside_line(x, eta[:, :1], axes, along),
        scatter=np.sqrt((weight * left * left).sum(axis=0).mean(axis=-1)),
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
    """y at the trial; the linear model at η = 0 of its line, and its slope; η; coordinates; y at the nodes.

    All (Pb, T, ·).
    """
    where = slice(points.start, points.stop)
    shape = (len(points), tiles.size, model.estimate.shape[1])
    every = range(len(model.families))
    draws = dict(block(model.families, every, points, tiles.seed, tile, tiles.size))
    used = [f for f, _ in along[0].parts]
    roots = roots_of(model, every, points, tiles, tile)
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
