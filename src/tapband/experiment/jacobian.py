"""Derivatives of the chain at its nominal inputs, to machine precision.

The integration is linear in Cp, so its derivatives are its weights; the handful of stream scalars and the
compressibility rule go by complex step.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.chain import Equation, moved_nodes, prandtl_glauert
from tapband.experiment.rotate import wind_axes
from tapband.experiment.stream import solve

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
    mach_shift, q_shift, alpha, length, centre, edge_common, edge_loading, spacing_1…3, rule.
    ``cp_slope`` (P, n) is ∂Cp_i/∂shift_i.
    """

    reading: Array
    extra: Array
    shift: Array
    scalars: Mapping[str, Array]
    stream: Mapping[str, StreamSlopes]
    cp_slope: Array


def stream_slopes(equation: Equation, channels: Mapping[str, Array]) -> dict[str, StreamSlopes]:
    """Derivatives of the stream by each of its scalars, by complex step."""
    shifts = () if equation.arrangement in ("mach", "dynamic and mach") else SHIFTS
    result = {}
    zero = np.zeros_like(next(iter(channels.values())), dtype=np.complex128)
    for name in (*channels, *shifts):
        varied = {k: v + 1j * STEP * (k == name) for k, v in channels.items()}
        moved = {k: zero + 1j * STEP for k in shifts if k == name}
        state = solve(equation.arrangement, equation.pressures, varied, **moved)
        result[name] = StreamSlopes(
            q=np.imag(state.q) / STEP, mach=np.imag(state.mach) / STEP, offset=np.imag(state.offset) / STEP
        )
    return result


def jacobian(
    equation: Equation, reading: Array, alpha: Array, channels: Mapping[str, Array], rule_spread: Array | None
) -> Jacobian:
    """Derivatives for P points; reading (P, n) with zeros at dead taps, alpha (P,) [rad], channels (P,)."""
    stream = solve(equation.arrangement, equation.pressures, channels)
    live = equation.quadrature.live
    cp = np.where(live, (reading + stream.offset[:, None]) / stream.q[:, None], 0.0)
    slopes = stream_slopes(equation, channels)
    cp_slope = np.where(live, cp @ equation.quadrature.slope.T + equation.quadrature.slope_constant, 0.0)
    blocks = [_measured(equation, cp, stream.mach)]
    if equation.compressibility != "none":
        blocks.append(
            _scaled(equation, blocks[0], stream.mach)
            if equation.on_coefficients
            else _moved(equation, cp, stream.mach)
        )
    finished = [
        block.finish(equation, alpha, stream.q, cp, cp_slope, slopes, rule_spread if i else None)
        for i, block in enumerate(blocks)
    ]
    return Jacobian(
        reading=_join([f[0] for f in finished]), extra=_join([f[1] for f in finished]),
        shift=_join([f[2] for f in finished]),
        scalars={name: _join([f[3][name] for f in finished]) for name in finished[0][3]},
        stream=slopes, cp_slope=cp_slope,
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
    spacing: Array
    """(P, 3 variates, 3)."""

    def finish(
        self, equation: Equation, alpha: Array, q: Array, cp: Array, cp_slope: Array,
        slopes: Mapping[str, StreamSlopes], rule_spread: Array | None,
    ) -> Finished:
        """Derivatives of the five coefficients by every input."""
        turn = _turn(equation, alpha)
        by_cp = np.matmul(turn, self.by_cp)
        by_offset = by_cp.sum(axis=2) / q[:, None]
        by_q = -np.einsum("pmn,pn->pm", by_cp, cp) / q[:, None]
        by_mach = np.einsum("pmk,pk->pm", turn, self.by_mach)
        scalars = {
            name: by_q * s.q[:, None] + by_offset * s.offset[:, None] + by_mach * s.mach[:, None]
            for name, s in slopes.items()
        }
        y = np.einsum("pmk,pk->pm", turn, self.value)
        zero = np.zeros_like(alpha)
        scalars["alpha"] = np.stack([zero, zero, zero, -y[:, 4], y[:, 3]], axis=1)
        cm = -2.0 * self.value[:, 2] - equation.moment_centre * self.value[:, 0]
        by_length = np.stack([-y[:, 0], -y[:, 1], cm, -y[:, 3], -y[:, 4]], axis=1)
        scalars["length"] = by_length if equation.in_lengths else np.zeros_like(y)
        scalars["centre"] = np.stack([zero, zero, y[:, 0], zero, zero], axis=1)
        scalars["edge_common"] = np.einsum("pmk,pk->pm", turn, self.edge_common)
        scalars["edge_loading"] = np.einsum("pmk,pk->pm", turn, self.edge_loading)
        for j in range(3):
            scalars[f"spacing_{j + 1}"] = np.einsum("pmk,pk->pm", turn, self.spacing[:, j])
        scalars["rule"] = np.zeros_like(y)
        if rule_spread is not None:
            cl, cd = wind_axes(rule_spread[:, 0], rule_spread[:, 1], alpha)
            scalars["rule"] = np.column_stack([rule_spread, cl, cd])
        return by_cp / q[:, None, None], by_cp, -by_cp * cp_slope[:, None, :], scalars


def _turn(equation: Equation, alpha: Array) -> Array:
    """(P, 5, 3) from the integrals cn, ct, cm₀ to cn, ct, cm, cl, cd_pressure."""
    turn = np.zeros((alpha.size, 5, 3))
    turn[:, 0, 0] = turn[:, 1, 1] = turn[:, 2, 2] = 1.0
    turn[:, 2, 0] = equation.moment_centre
    turn[:, 3, 0] = turn[:, 4, 1] = np.cos(alpha)
    turn[:, 4, 0] = np.sin(alpha)
    turn[:, 3, 1] = -turn[:, 4, 0]
    return turn


def _measured(equation: Equation, cp: Array, mach: Array) -> _Body:
    rows = cp @ equation.tap_weights.T + equation.constant
    one = np.ones((mach.size, 1))
    return _Body(
        value=rows[:, :3], by_cp=equation.tap_weights[None, :3], by_mach=np.zeros((mach.size, 3)),
        edge_common=one * equation.edge_common[:3], edge_loading=one * equation.edge_loading[:3],
        spacing=rows[:, 3:].reshape(-1, 3, 3),
    )


def _scaled(equation: Equation, body: _Body, mach: Array) -> _Body:
    """The Prandtl-Glauert result: one factor on all."""
    factor = prandtl_glauert(equation, mach)
    slope = np.imag(prandtl_glauert(equation, mach + 1j * STEP)) / STEP
    f = factor[:, None]
    return _Body(
        value=body.value * f, by_cp=body.by_cp * f[:, :, None], by_mach=body.value * slope[:, None],
        edge_common=body.edge_common * f, edge_loading=body.edge_loading * f,
        spacing=body.spacing * f[:, :, None],
    )


def _moved(equation: Equation, cp: Array, mach: Array) -> _Body:
    """The result of a rule that acts on Cp."""
    rule = equation.quadrature
    nodes = cp @ rule.nodes_of.T + rule.nodes_constant
    after = moved_nodes(equation, nodes, mach)
    by_node = np.imag(moved_nodes(equation, nodes + 1j * STEP, mach + 0j)) / STEP
    by_mach = np.imag(moved_nodes(equation, nodes + 0j, mach + 1j * STEP)) / STEP
    weights = rule.node_weights[0]
    rows = after @ rule.node_weights.reshape(12, -1).T
    bent = weights[None] * by_node[:, None, :]
    return _Body(
        value=rows[:, :3], by_cp=bent @ rule.nodes_of, by_mach=by_mach @ weights.T,
        edge_common=bent @ rule.edge_common, edge_loading=bent @ rule.edge_loading,
        spacing=rows[:, 3:].reshape(-1, 3, 3),
    )
