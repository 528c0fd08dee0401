"""What joins the two sides: a batch of equations and the latent families that enter them.

P points, m outputs, T trials, G latents of one family. A family is the latents of one source.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.source import Shape

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Family:
    """The latents of one source: G members at each point, all of one distribution.

    A latent's identity is (source, member, point group): points of one group see the same draw. All share
    one χ² scale (finite ``dof``, normal shape: Student's t) or one doubt V of the half-width
    (``reliability`` r of a bounded shape: half-width times 1 + √3 r V, V uniform on ±1), whose identity is
    (source, scale group). ``dof`` is per point.
    """

    source: str
    members: tuple[str, ...]
    point_group: tuple[str, ...]
    scale_group: tuple[str, ...]
    shape: Shape = Shape.NORMAL
    top: float = 0.0
    dof: Array
    """(P,), inf where exactly known."""
    reliability: float = 0.0
    systematic: bool = True
    linear: bool = False
    """Given the latents of every family that is not linear, outputs marked so are affine in these."""

    @property
    def exact(self) -> bool:
        """Whether the scale is known exactly at every point."""
        return bool(np.all(np.isinf(self.dof)) and self.reliability == 0.0)


Draws = Mapping[int, Array]
"""Family index -> standardised draws (Pb, T, G), or (1, T, G) where all points of the block share them."""


class Problem(Protocol):
    """A batch of P equations y = f(ξ) with m outputs, as a propagator sees it."""

    @property
    def families(self) -> Sequence[Family]: ...
    @property
    def outputs(self) -> Sequence[str]: ...
    @property
    def estimate(self) -> Array:
        """y at ξ = 0 (P, m); NaN where the point has no value for that output."""
        ...

    @property
    def sensitivity(self) -> Sequence[Array]:
        """∂y/∂ξ at ξ = 0, one array (P, m, G) a family; the latents are scaled to unit variance."""
        ...

    @property
    def affine(self) -> NDArray[np.bool_]:
        """(m,) outputs that are affine in the linear families, given the others."""
        ...

    def evaluate(self, points: slice, draws: Draws) -> Array:
        """y (Pb, T, m) of a block of points; an absent family stands at zero; NaN where a trial is refused."""
        ...

    def given(self, points: slice, draws: Draws, out: Sequence[int]) -> tuple[Array, Mapping[int, Array]]:
        """As :meth:`evaluate`, and for each linear family in ``out`` (not drawn: integrated out) the variance
        Σ_k(∂y/∂ξ_k)² it adds, (Pb, T, m), exact for the outputs marked affine."""
        ...
