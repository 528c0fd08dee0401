"""A small chain of the same build as the real one, cheap enough to time engines on: taps, stream, rotation."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from math import inf

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Draws, Family
from tapband.nouns.source import Shape

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Error:
    """One source: what it acts on ("tap", "module", "q", "alpha", "static", "gain") and how large it is."""

    name: str
    on: str
    size: float
    shape: Shape = Shape.NORMAL
    shared: bool = True
    dof: float = inf


NORMAL_DOMINATED = (
    Error(name="port zero", on="tap", size=4.0),
    Error(name="noise", on="tap", size=4.0, shared=False),
    Error(name="module zero", on="module", size=3.0, shape=Shape.RECTANGULAR),
    Error(name="dynamic pressure", on="q", size=0.002),
    Error(name="angle", on="alpha", size=3e-4),
    Error(name="static", on="static", size=2.0),
    Error(name="gain", on="gain", size=0.001, shape=Shape.RECTANGULAR),
)
CURVED = (
    Error(name="port zero", on="tap", size=4.0, shape=Shape.RECTANGULAR),
    Error(name="noise", on="tap", size=4.0, shape=Shape.RECTANGULAR, shared=False),
    Error(name="module zero", on="module", size=3.0, shape=Shape.RECTANGULAR),
    Error(name="dynamic pressure", on="q", size=0.012, shape=Shape.RECTANGULAR),
    Error(name="angle", on="alpha", size=1e-3, shape=Shape.RECTANGULAR),
    Error(name="static", on="static", size=2.0, shape=Shape.RECTANGULAR),
    Error(name="gain", on="gain", size=0.006, shape=Shape.RECTANGULAR),
)


class TapChain:
    """cn, ct, cm, cl, cd of P angles from n taps: a :class:`tapband.nouns.problem.Problem`."""

    outputs = ("cn", "ct", "cm", "cl", "cd")
    affine = np.ones(5, dtype=np.bool_)

    def __init__(self, errors: Sequence[Error], alphas: Sequence[float] = (0.06,), taps: int = 60) -> None:
        self.errors = tuple(errors)
        self.alpha = np.asarray(alphas, dtype=np.float64)
        x = np.linspace(0.0, 1.0, taps)
        side = np.where(np.arange(taps) % 2, 1.0, -1.0)
        self._weights = (
            np.stack([-3.0 * side * np.sin(np.pi * x), np.cos(3.0 * x), 2.0 * side * (x - 0.25)], axis=1)
            / taps
        )
        self._module = np.eye(4)[np.arange(taps) * 4 // taps]
        q = 1500.0
        pressure = q * (side * (0.3 + 3.0 * self.alpha[:, None]) * (1.0 - x) - 0.2 + 0.3 * np.cos(5.0 * x))
        self._integral = (pressure[:, None, :] @ self._weights) / q
        self._q = q
        self.families = tuple(self._family(e, taps) for e in self.errors)
        every = slice(0, len(self.alpha))
        self.estimate = self.evaluate(every, {})[:, 0]
        self.sensitivity = tuple(self._slopes(f) for f in range(len(self.errors)))

    def _family(self, error: Error, taps: int) -> Family:
        count = {"tap": taps, "module": 4}.get(error.on, 1)
        points = len(self.alpha)
        # A point's identity is its angle, so that shuffled points keep their own draws.
        group = ("",) * points if error.shared else tuple(f"{a:.6f}" for a in self.alpha)
        return Family(
            source=error.name,
            members=tuple(str(k) for k in range(count)),
            point_group=group,
            scale_group=group,
            shape=error.shape,
            dof=np.full(points, error.dof),
            systematic=error.shared,
            linear=error.on in ("tap", "module"),
        )

    def _slopes(self, f: int) -> Array:
        """Central differences are exact to 1e-9 of these smooth, nearly linear functions."""
        step, count = 1e-4, len(self.families[f].members)
        ends = [
            self.evaluate(slice(0, len(self.alpha)), {f: s * step * np.eye(count)[None]}) for s in (1.0, -1.0)
        ]
        return np.ascontiguousarray(np.swapaxes(ends[0] - ends[1], 1, 2) / (2.0 * step))

    def evaluate(self, points: slice, draws: Draws) -> Array:
        """y (Pb, T, m)."""
        return self._coefficients(points, draws)[0]

    def given(self, points: slice, draws: Draws, out: Sequence[int]) -> tuple[Array, Mapping[int, Array]]:
        """y without the families ``out`` and the variance (Pb, T, m) each adds."""
        y, q, cos, sin = self._coefficients(points, draws)
        added = {}
        for f in out:
            loads = self._loads(f)
            c = loads.T @ loads / (q * q)[..., None, None]
            cross = 2.0 * sin * cos * c[..., 0, 1]
            rows = [
                *(c[..., k, k] for k in range(3)),
                cos**2 * c[..., 0, 0] + sin**2 * c[..., 1, 1] - cross,
                sin**2 * c[..., 0, 0] + cos**2 * c[..., 1, 1] + cross,
            ]
            added[f] = np.broadcast_to(np.stack(np.broadcast_arrays(*rows), axis=-1), y.shape)
        return y, added

    def _loads(self, f: int) -> Array:
        """(G, 3) what a latent at the taps adds to the integrals times q."""
        error = self.errors[f]
        weights = self._weights if error.on == "tap" else self._module.T @ self._weights
        return error.size * weights

    def _coefficients(self, points: slice, draws: Draws) -> tuple[Array, Array, Array, Array]:
        alpha, q = self.alpha[points][:, None], np.full((1, 1), self._q)
        added: Array | float = 0.0
        scale, static = np.ones((1, 1)), np.zeros((1, 1))
        for f, xi in draws.items():
            error = self.errors[f]
            moved = error.size * xi[..., 0]
            match error.on:
                case "tap" | "module":
                    added = added + xi @ self._loads(f)
                case "q":
                    q = q * (1.0 + moved)
                case "alpha":
                    alpha = alpha + moved
                case "static":
                    static = static + moved
                case _:
                    scale = scale + moved
        raw = self._integral[points] * self._q * scale[..., None]
        c = (raw + added - static[..., None] * self._weights.sum(axis=0)) / q[..., None]
        cos, sin = np.cos(alpha), np.sin(alpha)
        cl = c[..., 0] * cos - c[..., 1] * sin
        cd = c[..., 0] * sin + c[..., 1] * cos
        return np.concatenate([c, cl[..., None], cd[..., None]], axis=-1), q, cos, sin


def scaled(errors: Sequence[Error], **factors: float) -> tuple[Error, ...]:
    """The errors with some sizes multiplied, by what they act on."""
    return tuple(replace(e, size=e.size * factors.get(e.on, 1.0)) for e in errors)
