"""How the measured integrals answer errors that enter them linearly, at each drawn trial.

With tap i displaced by δ_i the integrals are affine in the tap coefficients, with weights
``W − (W∘δ) D₁ + ½(W∘δ²) D₂``; D₁ and D₂ differentiate the cubic through the readings. One point is done at a
time, so that its arrays stay in cache and its row depends on no other.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.chain import Equation, Inputs, prandtl_glauert, stream_of
from tapband.experiment.rowwise import in_pieces
from tapband.reduction.loads import Entry, Loaded

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
PAIRS = ((0, 0), (1, 1), (2, 2), (0, 1))
"""Products of cn, ct, cm that the variances of the five coefficients need."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Response:
    """One live set at some drawn trials; arrays (Pb or 1, T or 1), ``shift`` with a trailing axis n."""

    equation: Equation
    shift: Array | None
    q: Array
    alpha: Array
    centre: Array
    length: Array | None
    factor: Array | None
    """Prandtl-Glauert factor, None without a rule."""

    @classmethod
    def of(cls, equation: Equation, inputs: Inputs) -> Response:
        """At the inputs of a block of points."""
        stream = stream_of(equation, inputs)
        moved = 0.0 if inputs.centre is None else inputs.centre
        return cls(
            equation=equation,
            shift=inputs.shift,
            q=stream.q,
            alpha=inputs.alpha,
            centre=np.atleast_2d(equation.moment_centre + moved),
            length=inputs.length if equation.in_lengths else None,
            factor=None if equation.compressibility == "none" else prandtl_glauert(equation, stream.mach),
        )

    def variances(self, families: Mapping[int, Loaded], rows: Indices) -> dict[int, Array]:
        """Σ_k (∂y/∂ξ_k)² of each linear family at the points ``rows``, (Pb, T or 1, m) by its number."""
        added = {f: _added(one, rows) for f, one in families.items() if one.entries[0].slot == "added"}
        within = {f: one for f, one in families.items() if f not in added}
        trials = np.broadcast_shapes(*(values.shape[1:2] for values in self._drawn()))
        squares = {f: np.empty((len(rows), len(PAIRS), *trials)) for f in within}
        for place, point in enumerate(rows.tolist() if within else []):
            by_cp = self._by_cp(place)
            for f, loaded in within.items():
                body = self._body(by_cp, loaded, place, point)
                for (i, j), row in zip(PAIRS, squares[f][place], strict=True):
                    row[:] = np.einsum("tg,tg->t", body[i], body[j])
        return added | {f: self._turned(some) for f, some in squares.items()}

    def _drawn(self) -> list[Array]:
        """What of this the products depend on."""
        return [v for v in (self.shift, self.q, self.centre, self.length) if v is not None]

    def _by_cp(self, place: int) -> Array:
        """∂(cn, ct, cm)/∂Cp_i of one point, (3, T or 1, n)."""
        weights = self.equation.tap_weights[:, None, :]
        if self.shift is None:
            return self._about(weights, place)
        shift = _row(self.shift, place)
        n = shift.shape[-1]
        bent = np.empty((3, len(shift), 2 * n))
        np.multiply(weights, shift, out=bent[..., :n])
        np.multiply(bent[..., :n], shift, out=bent[..., n:])
        by_cp = in_pieces(bent, self._derivatives)
        by_cp += weights
        return self._about(by_cp, place)

    @cached_property
    def _derivatives(self) -> Array:
        """(2n, n): what a displacement, and its square, do to the weights."""
        rule = self.equation.quadrature
        return np.concatenate([-rule.slope, 0.5 * rule.curvature])

    def _body(self, by_cp: Array, loaded: Loaded, place: int, point: int) -> Array:
        """∂(cn, ct, cm)/∂ξ (3, T or 1, G) of one family at one point."""
        count = len(loaded.family.members)
        parts = [self._entry(by_cp, entry, count, place, point) for entry in loaded.entries]
        return parts[0] if len(parts) == 1 else np.sum(np.broadcast_arrays(*parts), axis=0)

    def _entry(self, by_cp: Array, entry: Entry, count: int, place: int, point: int) -> Array:
        load = entry.load[point]
        if not entry.on_taps:
            edge = getattr(self.equation, entry.slot)[:, None, None] * load
            only = np.arange(count) == entry.member[0]
            return np.asarray(self._about(edge, place) * only)
        scaled = by_cp * (load / _row(self.q, place)[:, None] if entry.slot == "reading" else load)
        if count == entry.member.size and np.array_equal(entry.member, np.arange(count)):
            return np.asarray(scaled)
        return in_pieces(scaled, (entry.member[:, None] == np.arange(count)).astype(np.float64))

    def _about(self, rows: Array, place: int) -> Array:
        """cn, ct, cm about the moment centre (3, T or 1, k) from cn, ct, cm₀ rows."""
        if self.length is not None:
            g = 1.0 / (1.0 + _row(self.length, place)[:, None])
            rows = rows * np.stack([g, g, g * g])
        moved = np.empty((3, *np.broadcast_shapes(rows.shape[1:], (self.centre.shape[1], 1))))
        moved[:] = rows
        moved[2] += _row(self.centre, place)[:, None] * rows[0]
        return moved

    def _turned(self, squares: Array) -> Array:
        """Variances of the coefficients (Pb, T or 1, m) from the products ``PAIRS`` (Pb, 4, T or 1)."""
        cn, ct, cm, both = (squares[:, k] for k in range(4))
        cos, sin = np.cos(self.alpha), np.sin(self.alpha)
        cross = 2.0 * sin * cos * both
        lift = cos**2 * cn + sin**2 * ct - cross
        drag = sin**2 * cn + cos**2 * ct + cross
        measured = np.stack(np.broadcast_arrays(cn, ct, cm, lift, drag), axis=-1)
        if self.factor is None:
            return measured
        return np.concatenate(np.broadcast_arrays(measured, measured * self.factor[..., None] ** 2), axis=-1)


def _row(values: Array, place: int) -> Array:
    """What one point sees of values (Pb or 1, ...)."""
    return np.asarray(values[place if len(values) > 1 else 0])


def _added(loaded: Loaded, rows: Indices) -> Array:
    """(Pb, 1, m) of an error of coefficients themselves."""
    assert len(loaded.entries) == 1, "an error of a coefficient acts on nothing else"
    return np.asarray(np.sum(loaded.entries[0].load[rows] ** 2, axis=2)[:, None, :])
