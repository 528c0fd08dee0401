"""Derivatives of the chain at its nominal inputs, to machine precision.

The integration is linear in Cp, so its derivatives are its weights; the handful of stream scalars and the
compressibility rule go by complex step.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.chain import Equation, moved_nodes, prandtl_glauert, turn
from tapband.experiment.rowwise import each_row
from tapband.experiment.stream import Stream, solve

Array = NDArray[np.float64]
STEP = 1e-30
SHIFTS = ("mach_shift", "q_shift")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class StreamSlopes:
    """∂q, ∂M, ∂offset by one stream scalar, each (P,)."""

    q: Array
    mach: Array
    offset: Array


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Jacobian:
    """∂y by every input of P points; y has m outputs.

    ``reading``, ``extra``, ``shift`` are (P, m, n); ``scalars`` holds (P, m) for each channel and for
    mach_shift, q_shift, alpha, length, centre, edge_common, edge_loading.
    ``cp_slope`` (P, n) is ∂Cp_i/∂shift_i.
    """

    reading: Array
    extra: Array
    shift: Array
    scalars: Mapping[str, Array]
    stream: Mapping[str, StreamSlopes]
    cp_slope: Array


def stream_slopes(
    equation: Equation, channels: Mapping[str, Array], shifts: Mapping[str, Array] | None = None
) -> dict[str, StreamSlopes]:
    """Derivatives of the stream by each of its scalars, by complex step."""
    direct = equation.arrangement in ("mach", "dynamic and mach")
    base = {name: np.asarray(value, dtype=np.complex128) for name, value in (shifts or {}).items()}
    zero = np.zeros_like(next(iter(channels.values())), dtype=np.complex128)
    result = {}
    for name in (*channels, *(() if direct else SHIFTS)):
        varied = {k: v + 1j * STEP * (k == name) for k, v in channels.items()}
        moved = dict(base)
        if name in SHIFTS:
            moved[name] = base.get(name, zero) + 1j * STEP
        state = solve(equation.arrangement, equation.pressures, varied, **moved)
        result[name] = StreamSlopes(
            q=np.imag(state.q) / STEP, mach=np.imag(state.mach) / STEP, offset=np.imag(state.offset) / STEP
        )
    return result


def jacobian(
    equation: Equation,
    cp: Array,
    stream: Stream,
    alpha: Array,
    channels: Mapping[str, Array],
    shifts: Mapping[str, Array] | None = None,
) -> Jacobian:
    """Derivatives for P points: cp (P, n) zero at dead taps, alpha (P,) [rad], channels and shifts (P,)."""
    live = equation.quadrature.live
    slopes = stream_slopes(equation, channels, shifts)
    cp_slope = np.where(
        live, each_row(cp, equation.quadrature.slope.T) + equation.quadrature.slope_constant, 0.0
    )
    blocks = [_measured(equation, cp, stream.mach)]
    if equation.compressibility != "none":
        scaled = equation.on_coefficients
        blocks.append(
            _scaled(equation, blocks[0], stream.mach) if scaled else _moved(equation, cp, stream.mach)
        )
    finished = [block.finish(equation, alpha, stream.q, cp, cp_slope, slopes) for block in blocks]
    return Jacobian(
        reading=_join([f[0] for f in finished]),
        extra=_join([f[1] for f in finished]),
        shift=_join([f[2] for f in finished]),
        scalars={name: _join([f[3][name] for f in finished]) for name in finished[0][3]},
        stream=slopes,
        cp_slope=cp_slope,
    )


def _join(parts: list[Array]) -> Array:
    return parts[0] if len(parts) == 1 else np.concatenate(parts, axis=1)


Finished = tuple[Array, Array, Array, dict[str, Array]]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Body:
    """Integrals cn, ct, cm₀ of one result (measured or reference) and their derivatives."""

    value: Array
    """(P, 3)."""
    by_cp: Array
    """(P or 1, 3, n)."""
    by_mach: Array
    """(P, 3)."""
    edge_common: Array
    edge_loading: Array

    def finish(
        self,
        equation: Equation,
        alpha: Array,
        q: Array,
        cp: Array,
        cp_slope: Array,
        slopes: Mapping[str, StreamSlopes],
    ) -> Finished:
        """Derivatives of the five coefficients by every input."""
        to_five = turn(equation, alpha)
        by_cp = np.matmul(to_five, self.by_cp)
        by_offset = by_cp.sum(axis=2) / q[:, None]
        by_q = -np.einsum("pmn,pn->pm", by_cp, cp) / q[:, None]
        by_mach = np.einsum("pmk,pk->pm", to_five, self.by_mach)
        scalars = {
            name: by_q * s.q[:, None] + by_offset * s.offset[:, None] + by_mach * s.mach[:, None]
            for name, s in slopes.items()
        }
        y = np.einsum("pmk,pk->pm", to_five, self.value)
        zero = np.zeros_like(alpha)
        scalars["alpha"] = np.stack([zero, zero, zero, -y[:, 4], y[:, 3]], axis=1)
        cm = -2.0 * self.value[:, 2] - equation.moment_centre * self.value[:, 0]
        by_length = np.stack([-y[:, 0], -y[:, 1], cm, -y[:, 3], -y[:, 4]], axis=1)
        scalars["length"] = by_length if equation.in_lengths else np.zeros_like(y)
        scalars["centre"] = np.stack([zero, zero, y[:, 0], zero, zero], axis=1)
        scalars["edge_common"] = np.einsum("pmk,pk->pm", to_five, self.edge_common)
        scalars["edge_loading"] = np.einsum("pmk,pk->pm", to_five, self.edge_loading)
        return by_cp / q[:, None, None], by_cp, -by_cp * cp_slope[:, None, :], scalars


def _measured(equation: Equation, cp: Array, mach: Array) -> _Body:
    rows = each_row(cp, equation.tap_weights.T) + equation.constant
    one = np.ones((mach.size, 1))
    return _Body(
        value=rows,
        by_cp=equation.tap_weights[None],
        by_mach=np.zeros((mach.size, 3)),
        edge_common=one * equation.edge_common,
        edge_loading=one * equation.edge_loading,
    )


def _scaled(equation: Equation, body: _Body, mach: Array) -> _Body:
    """The Prandtl-Glauert result: one factor on all."""
    factor = prandtl_glauert(equation, mach)
    slope = np.imag(prandtl_glauert(equation, mach + 1j * STEP)) / STEP
    f = factor[:, None]
    return _Body(
        value=body.value * f,
        by_cp=body.by_cp * f[:, :, None],
        by_mach=body.value * slope[:, None],
        edge_common=body.edge_common * f,
        edge_loading=body.edge_loading * f,
    )


def _moved(equation: Equation, cp: Array, mach: Array) -> _Body:
    """The result of a rule that acts on Cp."""
    rule = equation.quadrature
    nodes = each_row(cp, rule.nodes_of.T) + rule.nodes_constant
    after = moved_nodes(equation, nodes, mach)
    by_node = np.imag(moved_nodes(equation, nodes + 1j * STEP, mach + 0j)) / STEP
    by_mach = np.imag(moved_nodes(equation, nodes + 0j, mach + 1j * STEP)) / STEP
    weights = rule.node_weights[0]
    rows = each_row(after, weights.T)
    bent = weights[None] * by_node[:, None, :]
    return _Body(
        value=rows,
        by_cp=bent @ rule.nodes_of,
        by_mach=each_row(by_mach, weights.T),
        edge_common=bent @ rule.edge_common,
        edge_loading=bent @ rule.edge_loading,
    )
