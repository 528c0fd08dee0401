"""Which latents are integrated out and which are drawn, chosen from the sensitivities of a point alone.

*integrated*: families that enter linearly, given the others, are not drawn; normal ones by Φ, or, where
normal ones weigh too little, those of any shape by their own exact law, scaled.
*line*: all is drawn, and one direction is integrated out numerically: of the normal latents together, or
one bounded latent. *plain*: neither would help.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product
from math import pi, sqrt

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.source import Shape
from tapband.probability.distributions import half_width
from tapband.probability.model import Model

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_AMPLE = 0.15
"""Share of variance from which normal linear families alone smooth well."""
_ENOUGH = 0.04
"""Least share of variance that may be integrated out with profit."""
_SHORTEST_LINE = 0.15
"""Least length, in standard uncertainties, over which a line smooths with profit."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Choice:
    """How one point is done: families integrated out, whether by Φ, and which outputs (m,) that way."""

    out: tuple[int, ...]
    normal: bool
    integrated: tuple[bool, ...]
    line: tuple[bool, ...]


def choices(model: Model) -> list[Choice]:
    """The choice of every point."""
    linear = [f for f, family in enumerate(model.families) if family.linear]
    normal = tuple(f for f in linear if model.families[f].shape is Shape.NORMAL)
    # A t scale can be drawn; a law that averages over it would have tails beyond any table.
    shaped = tuple(f for f in linear if f not in normal or model.families[f].exact)
    by_normal = model.share[..., list(normal)].sum(axis=-1)
    by_shape = model.share[..., list(shaped)].sum(axis=-1)
    rows = model.live & model.affine
    ample = np.all(~rows | (by_normal >= _AMPLE), axis=1)
    count_normal = (rows & (by_normal >= _ENOUGH)).sum(axis=1)
    count_shape = (rows & (by_shape >= _ENOUGH)).sum(axis=1)
    least = [np.where(rows, part, 1.0).min(axis=1, initial=1.0) for part in (by_normal, by_shape)]
    use_normal = (
        ample | (count_normal > count_shape) | ((count_normal == count_shape) & (least[1] <= 1.5 * least[0]))
    )
    result = []
    for point, by_phi in enumerate(use_normal):
        done = rows[point] & ((by_normal if by_phi else by_shape)[point] >= _ENOUGH)
        result.append(_choice(model, point, normal if by_phi else shaped, bool(by_phi), done))
    return result


def fallback(model: Model, point: int) -> Choice:
    """The choice where a law of other shape does not scale: normal families only."""
    normal = tuple(
        f for f, family in enumerate(model.families) if family.linear and family.shape is Shape.NORMAL
    )
    share = model.share[point][:, list(normal)].sum(axis=-1)
    done = model.live[point] & model.affine & (share >= _ENOUGH)
    return _choice(model, point, normal, True, done)


def _choice(model: Model, point: int, out: tuple[int, ...], normal: bool, done: Mask) -> Choice:
    line = model.live[point] & ~done
    return Choice(
        out=out if done.any() else (),
        normal=normal,
        integrated=tuple(done.tolist()),
        line=tuple(line.tolist()),
    )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Direction:
    """A line through latent space at one point: unit vector by family, and the law along it."""

    parts: tuple[tuple[int, Array], ...]
    shape: Shape
    top: float

    @property
    def key(self) -> tuple[tuple[int, ...], Shape, float]:
        """What points must share to be done together."""
        return tuple(f for f, _ in self.parts), self.shape, self.top


def direction(model: Model, point: int, rows: Mask) -> Direction | None:
    """The line that smooths the worst of the outputs ``rows`` (m,) most; None where none is worth it."""
    u = model.u[point][rows]
    normal = tuple(f for f, family in enumerate(model.families) if family.shape is Shape.NORMAL)
    best: Direction | None = None
    length = _SHORTEST_LINE
    columns = [model.sensitivity[f][point][rows] / u[:, None] for f in normal]
    if normal:
        joined = np.concatenate(columns, axis=1)
        unit = _middle(joined)
        reach = float(np.min(np.abs(joined @ unit))) * sqrt(2.0 * pi)
        if reach > length:
            ends = np.cumsum([c.shape[1] for c in columns])[:-1]
            best, length = (
                Direction(
                    parts=tuple(zip(normal, np.split(unit, ends), strict=True)), shape=Shape.NORMAL, top=0.0
                ),
                reach,
            )
    for f, family in enumerate(model.families):
        if family.shape is Shape.NORMAL:
            continue
        weakest = np.abs(model.sensitivity[f][point][rows] / u[:, None]).min(axis=0)
        member = int(np.argmax(weakest))
        reach = 2.0 * half_width(family.shape, family.top) * float(weakest[member])
        if reach > length:
            one = np.zeros(weakest.size)
            one[member] = 1.0
            best, length = Direction(parts=((f, one),), shape=family.shape, top=family.top), reach
    return best


def _middle(rows: Array) -> Array:
    """Unit vector (G,) on which the least of the rows (m, G), by size, projects most; signs are free."""
    length = np.sqrt((rows * rows).sum(axis=1))
    if not np.all(length > 0.0):
        return np.zeros(rows.shape[1])
    unit = rows / length[:, None]
    if len(unit) <= 6:
        signs = np.array([(1.0, *rest) for rest in product((1.0, -1.0), repeat=len(unit) - 1)])
    else:
        leading = np.linalg.eigh(unit @ unit.T)[1][:, -1]
        signs = np.where(leading < 0.0, -1.0, 1.0)[None]
    sums = signs @ unit
    size = np.sqrt((sums * sums).sum(axis=1))
    sums = sums / np.where(size > 1e-9, size, np.inf)[:, None]
    worst = np.abs(sums @ rows.T).min(axis=1)
    chosen: Array = sums[int(np.argmax(worst))]
    return chosen
