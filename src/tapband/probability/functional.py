"""A problem from a plain function: worked examples of the guides, and a user's own equation.

>>> from tapband.probability.functional import Quantity, problem_of
>>> from tapband.probability.linearised import propagate
>>> power = problem_of(lambda v, r: v * v / r, [Quantity("V", 10.0, 0.1), Quantity("R", 50.0, 0.2)])
>>> float(propagate(power, 0.95).u[0, 0].round(4))
0.0408
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from math import inf
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from tapband.nouns.problem import Draws, Family
from tapband.nouns.source import Shape

Array = NDArray[np.float64]
Function = Callable[..., Any]

_STEP = 1e-30
"""Complex step: no difference is formed, so it may be as small as one likes (Squire & Trapp 1998)."""


@dataclass(frozen=True, slots=True)
class Quantity:
    """An input: estimate and standard uncertainty (numbers, or one a point), and what is known of its error.

    ``shared``: all points see one error. ``linear``: the outputs are affine in it, given all that are not.
    """

    name: str
    estimate: ArrayLike
    standard: ArrayLike = 0.0
    shape: Shape = Shape.NORMAL
    top: float = 0.0
    dof: float = inf
    reliability: float = 0.0
    shared: bool = True
    linear: bool = False


@dataclass(frozen=True, slots=True, kw_only=True)
class Equation:
    """y = f(z_1, …, z_d) with z = centre + Σ L_f ξ_f, as :class:`tapband.nouns.problem.Problem` asks."""

    function: Function
    centre: Array
    """(P, d)"""
    families: tuple[Family, ...]
    loading: tuple[Array, ...]
    """(P, d, G) a family"""
    outputs: tuple[str, ...]
    affine: NDArray[np.bool_]
    estimate: Array
    sensitivity: tuple[Array, ...]

    def evaluate(self, points: slice, draws: Draws) -> Array:
        """y (Pb, T, m)."""
        return _real(self.function, self._inputs(points, draws))

    def given(self, points: slice, draws: Draws, out: Sequence[int]) -> tuple[Array, Mapping[int, Array]]:
        """y without the families ``out``, and the variance (Pb, T, m) each of them adds."""
        z = self._inputs(points, draws)
        added = {f: (_slopes(self.function, z, self.loading[f][points]) ** 2).sum(axis=-2) for f in out}
        return _real(self.function, z), added

    def _inputs(self, points: slice, draws: Draws) -> Array:
        """z (Pb, T, d)."""
        z = self.centre[points][:, None, :]
        for index, xi in draws.items():
            z = z + xi @ np.swapaxes(self.loading[index][points], -1, -2)
        return z


def equation(
    function: Function,
    centre: ArrayLike,
    families: Sequence[Family],
    loading: Sequence[ArrayLike],
    outputs: Sequence[str] = ("y",),
    affine: ArrayLike = True,
) -> Equation:
    """The equation with its estimate and its derivatives, taken by complex step.

    ``function`` takes d arrays that broadcast and returns one array, or a tuple of one an output. It must be
    analytic (no ``abs``, no ``hypot``). ``centre`` is (P, d), a loading (P, d, G) or (d, G).
    """
    z0 = np.atleast_2d(np.asarray(centre, dtype=np.float64))
    loads = tuple(
        np.broadcast_to(np.asarray(load, dtype=np.float64), (*z0.shape, np.shape(load)[-1]))
        for load in loading
    )
    return Equation(
        function=function,
        centre=z0,
        families=tuple(families),
        loading=loads,
        outputs=tuple(outputs),
        affine=np.broadcast_to(np.asarray(affine, dtype=np.bool_), (len(outputs),)),
        estimate=_real(function, z0[:, None, :])[:, 0],
        sensitivity=tuple(
            np.ascontiguousarray(np.swapaxes(_slopes(function, z0[:, None, :], load)[:, 0], -1, -2))
            for load in loads
        ),
    )


def problem_of(
    function: Function, quantities: Sequence[Quantity], outputs: Sequence[str] = ("y",)
) -> Equation:
    """The equation of independent quantities: each is a family of one latent under its own name."""
    estimates = (np.atleast_1d(np.asarray(q.estimate, dtype=np.float64)) for q in quantities)
    centre = np.stack(np.broadcast_arrays(*estimates), axis=-1)
    points = len(centre)
    families, loading = [], []
    for index, quantity in enumerate(quantities):
        standard = np.broadcast_to(np.asarray(quantity.standard, dtype=np.float64), (points,))
        if not np.any(standard):
            continue
        column = np.zeros((points, len(quantities), 1))
        column[:, index, 0] = standard
        families.append(_family(quantity, points))
        loading.append(column)
    return equation(function, centre, families, loading, outputs)


def _family(quantity: Quantity, points: int) -> Family:
    group = ("",) * points if quantity.shared else tuple(str(point) for point in range(points))
    return Family(
        source=quantity.name,
        members=("",),
        point_group=group,
        scale_group=group,
        shape=quantity.shape,
        top=quantity.top,
        dof=np.full(points, quantity.dof),
        reliability=quantity.reliability,
        systematic=quantity.shared,
        linear=quantity.linear,
    )


def _values(function: Function, z: NDArray[Any]) -> NDArray[Any]:
    """f at inputs z (..., d) -> (..., m)."""
    with np.errstate(all="ignore"):
        y = function(*np.moveaxis(z, -1, 0))
    parts = y if isinstance(y, tuple) else (y,)
    return np.stack(np.broadcast_arrays(*parts, z[..., 0])[:-1], axis=-1)


def _real(function: Function, z: Array) -> Array:
    return np.ascontiguousarray(np.real(_values(function, z)))


def _slopes(function: Function, z: Array, loading: Array) -> Array:
    """∂y/∂ξ (Pb, T, G, m) at the inputs z (Pb, T, d), by complex step."""
    steps = (1j * _STEP * loading[:, None, :, g] for g in range(loading.shape[-1]))
    return np.stack([_values(function, z + step).imag / _STEP for step in steps], axis=-2)
