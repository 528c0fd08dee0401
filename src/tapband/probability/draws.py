"""Keyed draws: every latent from a stream of its own, in fixed logical tiles.

The generator of a stream is keyed by (seed, source, point group, tile), that of its scale by (seed, source,
scale group, tile). So neither threads, blocks, the order of points nor any other source changes a draw,
and points of one group see the same draw. A family's members are the columns of one fixed-shape draw, dead
ones included: losing a tap moves no other.

The key is hashed to the 256 bits of an SFC64 state, which needs no further mixing, six times quicker than
seeding one from a SeedSequence.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from hashlib import blake2b
from math import sqrt

import numpy as np
from numpy.random import SFC64, Generator
from numpy.typing import NDArray

from tapband.nouns.problem import Draws, Family
from tapband.nouns.source import Shape
from tapband.probability.distributions import doubt, fill

Array = NDArray[np.float64]

TILE = 10_000
"""Trials of a logical tile of plain Monte Carlo: the block of JCGM 101:2008, 7.9.4."""
FINE = 128
"""Trials of a logical tile of the accelerated engine."""


def keyed(generator: Generator, *key: object) -> Generator:
    """The generator set to the start of the stream that belongs to the key."""
    digest = blake2b("\0".join(map(str, key)).encode(), digest_size=32).digest()
    words = np.frombuffer(digest, dtype="<u8").astype(np.uint64)
    state = {"bit_generator": "SFC64", "state": {"state": words}, "has_uint32": 0, "uinteger": 0}
    generator.bit_generator.state = state
    return generator


def fresh() -> Generator:
    """A generator to be keyed."""
    return Generator(SFC64(0))


def _identity(family: Family, point: int, exact: bool) -> tuple[str, str, float]:
    """What tells the draws of one point from another's: point group, scale group, size of the doubt."""
    if exact:
        return family.point_group[point], "", np.inf
    return family.point_group[point], family.scale_group[point], float(family.dof[point])


def scale(generator: Generator, family: Family, point: int, seed: int, size: int, tile: int) -> Array | None:
    """Common factor (size,) of the family's latents at a point in one tile; None where exactly 1."""
    if family.shape is Shape.NORMAL:
        nu = float(family.dof[point])
        if np.isinf(nu):
            return None
        keyed(generator, seed, family.source, "scale", family.scale_group[point], size, tile)
        chi2 = 2.0 * generator.standard_gamma(0.5 * nu, size=size)
        return np.sqrt(nu / np.maximum(chi2, 1e-300))
    r = doubt(family, point)
    if r == 0.0:
        return None
    keyed(generator, seed, family.source, "scale", family.scale_group[point], size, tile)
    return 1.0 + sqrt(3.0) * r * (2.0 * generator.random(size) - 1.0)


def _start(generator: Generator, family: Family, point: int, seed: int, size: int, tile: int) -> Generator:
    return keyed(generator, seed, family.source, "draw", family.point_group[point], size, tile)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Stream:
    generator: Generator
    factor: Array | None
    buffer: Array


class Tape:
    """Draws of one tile for some points, advanced chunk by chunk in reused buffers.

    Points that share a stream share its buffer; :meth:`of` returns views (1, T, G), so that what a point
    sees has the same shape whichever points stand beside it.
    """

    def __init__(
        self, families: Sequence[Family], points: Sequence[int], seed: int, tile: int, chunk: int
    ) -> None:
        self._families = families
        self._exact = [family.exact for family in families]
        self._done = 0
        self._streams: dict[tuple[int, tuple[str, str, float]], _Stream] = {}
        for index, family in enumerate(families):
            for point in points:
                key = (index, _identity(family, point, self._exact[index]))
                if key not in self._streams:
                    self._streams[key] = _Stream(
                        generator=_start(fresh(), family, point, seed, TILE, tile),
                        factor=scale(fresh(), family, point, seed, TILE, tile),
                        buffer=np.empty((chunk, len(family.members))),
                    )

    def advance(self) -> None:
        """Draw the next chunk of every stream."""
        for (index, _), stream in self._streams.items():
            family = self._families[index]
            fill(stream.generator, family.shape, family.top, stream.buffer)
            if stream.factor is not None:
                rows = stream.factor[self._done : self._done + len(stream.buffer)]
                np.multiply(stream.buffer, rows[:, None], out=stream.buffer)
        self._done += len(next(iter(self._streams.values())).buffer) if self._streams else 0

    def of(self, point: int) -> Draws:
        """What a point sees of the present chunk; valid until the next :meth:`advance`."""
        return {
            index: self._streams[index, _identity(family, point, self._exact[index])].buffer[None]
            for index, family in enumerate(self._families)
        }


def block(
    families: Sequence[Family], which: Sequence[int], points: range, seed: int, tile: int, size: int = FINE
) -> Draws:
    """Draws of a whole tile of ``size`` trials for a block of points: (Pb, T, G); (1, T, G) where shared."""
    generator = fresh()
    drawn: dict[int, Array] = {}
    for index in which:
        family = families[index]
        first: dict[tuple[str, str, float], int] = {}
        exact = family.exact
        row = [first.setdefault(_identity(family, point, exact), len(first)) for point in points]
        values = np.empty((len(first), size, len(family.members)))
        for slot, point in _first_rows(row, points):
            fill(_start(generator, family, point, seed, size, tile), family.shape, family.top, values[slot])
            factor = scale(generator, family, point, seed, size, tile)
            if factor is not None:
                values[slot] *= factor[:, None]
        drawn[index] = values if len(first) in (1, len(points)) else values[row]
    return drawn


def scales(
    families: Sequence[Family], which: Sequence[int], points: range, seed: int, tile: int, size: int = FINE
) -> Mapping[int, Array]:
    """Squared common factors (Pb, T) or (1, T) of those families among ``which`` whose scale is in doubt."""
    generator = fresh()
    result: dict[int, Array] = {}
    for index in which:
        family = families[index]
        if family.exact:
            continue
        first: dict[tuple[str, float], int] = {}
        row = [first.setdefault((family.scale_group[p], float(family.dof[p])), len(first)) for p in points]
        values = np.ones((len(first), size))
        for slot, point in _first_rows(row, points):
            factor = scale(generator, family, point, seed, size, tile)
            if factor is not None:
                values[slot] = factor * factor
        result[index] = values if len(first) in (1, len(points)) else values[row]
    return result


def _first_rows(row: Sequence[int], points: range) -> list[tuple[int, int]]:
    """(slot, first point that uses it), in order of slots."""
    seen: dict[int, int] = {}
    for slot, point in zip(row, points, strict=True):
        seen.setdefault(slot, point)
    return sorted(seen.items())
