"""Derivatives of the coefficients by every tap's own inputs, a block of points at a time."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.chain import Equation
from tapband.experiment.jacobian import Jacobian, jacobian
from tapband.experiment.stream import Stream
from tapband.reduction.assemble import Assembled
from tapband.reduction.loads import Loaded
from tapband.reduction.sensitivities import At

Array = NDArray[np.float64]
BLOCK = 256
"""Points differentiated at once: (points, coefficients, taps) arrays then stay near the processor."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Place:
    """Points of one live set with their derivatives; ``at.cp`` is zero at dead taps."""

    equation: Equation
    at: At

    @property
    def slopes(self) -> Jacobian:
        """∂y by every input."""
        return self.at.slopes


def differentiated(assembled: Assembled) -> Iterator[Place]:
    """All points, by live set and block; the same derivatives that the linearised propagation used."""
    stream, corrected, points = assembled.stream, assembled.corrected, assembled.points
    cp = np.nan_to_num(assembled.cp)
    for one in assembled.sets:
        for start in range(0, one.points.size, BLOCK):
            i = one.points[start : start + BLOCK]
            slopes = jacobian(
                one.equation,
                cp[i],
                Stream(
                    q=stream.q[i], mach=stream.mach[i], p_static=stream.p_static[i], offset=stream.offset[i]
                ),
                points.alpha[i],
                {name: values[i] for name, values in points.channels.items()},
                {name: values[i] for name, values in corrected.shifts.items()},
            )
            live = one.equation.quadrature.live
            yield Place(
                equation=one.equation, at=At(points=i, live=live, cp=cp[i], q=stream.q[i], slopes=slopes)
            )


def by_latent(loaded: Loaded, place: Place) -> Array:
    """∂y/∂ξ (Pb, m, G) of any source at the points of a block, through all that it acts on."""
    i, slopes, count = place.at.points, place.slopes, len(loaded.family.members)
    total = np.zeros((*slopes.extra.shape[:2], count))
    for entry in loaded.entries:
        load = entry.load[i]
        if entry.slot == "added":
            total += load
        elif entry.on_taps:
            moved = getattr(slopes, entry.slot) * load[:, None, :]
            total += moved @ (entry.member[:, None] == np.arange(count)).astype(np.float64)
        else:
            total[..., entry.member[0]] += slopes.scalars[entry.slot] * load[:, None]
    return total
