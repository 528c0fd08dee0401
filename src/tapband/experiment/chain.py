"""The equation of a test point: from readings, stream and angle to coefficients, one stage after the other.

``Inputs`` names every quantity that an error can enter; leading axes broadcast, a trailing axis n runs over
the taps. An input that is None stands at its nominal value. The chain is pure and takes complex values.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.place import at_nominal
from tapband.experiment.quadrature import Quadrature
from tapband.experiment.rotate import wind_axes
from tapband.experiment.rule import moved, refused
from tapband.experiment.stream import Stream, solve

Array = NDArray[np.float64]
Values = NDArray[Any]

MEASURED = ("cn", "ct", "cm", "cl", "cd_pressure")
REFERENCE = tuple(f"{name}_ref" for name in MEASURED)


@dataclass(frozen=True, slots=True, kw_only=True)
class Inputs:
    """Quantities of a test point (SI, rad, chords); leading axes broadcast.

    ``shift`` (…, n) how far each tap sits along the contour from its nominal place; ``extra`` (…, n) added to
    Cp; ``length`` relative error of the chord; ``edge_common`` and ``edge_loading`` added to the closing
    values; ``spacing`` (…, 3) and ``rule`` the variates of finite tap spacing and of the rule, within ±1;
    ``added`` (…, m) added to the coefficients.
    """

    reading: Values
    alpha: Values
    channels: Mapping[str, Values]
    shift: Values | None = None
    extra: Values | None = None
    mach_shift: Values | None = None
    q_shift: Values | None = None
    length: Values | None = None
    centre: Values | None = None
    edge_common: Values | None = None
    edge_loading: Values | None = None
    spacing: Values | None = None
    rule: Values | None = None
    added: Values | None = None


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Equation:
    """All that is fixed for the points of one set of live taps."""

    quadrature: Quadrature
    arrangement: str
    pressures: str
    moment_centre: float
    in_lengths: bool
    """Whether the contour was given in lengths, so that the coefficients depend on the chord."""
    compressibility: str = "none"
    reference_mach: float = 0.0
    tap_weights: Array
    """(12, n): rows cn, ct, cm₀ of the rule and of the three spacing differences."""
    constant: Array
    edge_common: Array
    edge_loading: Array

    @classmethod
    def of(
        cls, quadrature: Quadrature, *, arrangement: str, pressures: str, moment_centre: float,
        in_lengths: bool, compressibility: str = "none", reference_mach: float = 0.0,
    ) -> Equation:
        """The equation of a set of live taps, its weights gathered on the taps."""
        rows = quadrature.node_weights.reshape(12, -1)
        return cls(
            quadrature=quadrature, arrangement=arrangement, pressures=pressures, moment_centre=moment_centre,
            in_lengths=in_lengths, compressibility=compressibility, reference_mach=reference_mach,
            tap_weights=rows @ quadrature.nodes_of, constant=rows @ quadrature.nodes_constant,
            edge_common=rows @ quadrature.edge_common, edge_loading=rows @ quadrature.edge_loading,
        )

    @property
    def outputs(self) -> tuple[str, ...]:
        """Names of the coefficients, in order (m)."""
        return MEASURED if self.compressibility == "none" else MEASURED + REFERENCE

    @property
    def on_coefficients(self) -> bool:
        """Whether the rule is one factor on every coefficient."""
        return self.compressibility in ("none", "prandtl-glauert")


def stream_of(equation: Equation, inputs: Inputs) -> Stream:
    """The stream that the channels and the shifts give."""
    return solve(
        equation.arrangement, equation.pressures, inputs.channels, inputs.mach_shift, inputs.q_shift
    )


def tap_coefficients(reading: Values, stream: Stream) -> Values:
    """Cp = (p − p_static)/q at each tap (…, n)."""
    return np.asarray((reading + stream.offset[..., None]) / stream.q[..., None])


def evaluate(equation: Equation, inputs: Inputs, rule_spread: Values | None = None) -> Values:
    """Coefficients (…, m).

    ``rule_spread`` (…, 3) is what one unit of the rule variate adds to cn, ct, cm of the reference result.
    A state in which the rule does not hold gives NaN reference coefficients.
    """
    stream = stream_of(equation, inputs)
    cp = tap_coefficients(inputs.reading, stream)
    if inputs.extra is not None:
        cp = cp + inputs.extra
    if inputs.shift is not None:
        cp = at_nominal(cp, inputs.shift, equation.quadrature)
    if equation.on_coefficients:
        body = _spread(equation, integrals(equation, cp, inputs), inputs)
        parts = [body]
        if equation.compressibility != "none":
            parts.append(body * prandtl_glauert(equation, stream.mach)[..., None])
    else:
        nodes = _nodes(equation, cp, inputs)
        rows = equation.quadrature.node_weights.reshape(12, -1)
        after = moved_nodes(equation, nodes, stream.mach)
        parts = [_spread(equation, values @ rows.T, inputs) for values in (nodes, after)]
    if inputs.rule is not None and rule_spread is not None and len(parts) > 1:
        parts[1] = parts[1] + inputs.rule[..., None] * rule_spread
    y = np.concatenate([_outputs(equation, body, inputs) for body in parts], axis=-1)
    return y if inputs.added is None else np.asarray(y + inputs.added)


def integrals(equation: Equation, cp: Values, inputs: Inputs) -> Values:
    """(…, 12) integrals of the rule and of the spacing differences, from placed Cp (…, n)."""
    rows = cp @ equation.tap_weights.T + equation.constant
    if inputs.edge_common is not None:
        rows = rows + inputs.edge_common[..., None] * equation.edge_common
    if inputs.edge_loading is not None:
        rows = rows + inputs.edge_loading[..., None] * equation.edge_loading
    return np.asarray(rows)


def prandtl_glauert(equation: Equation, mach: Values) -> Values:
    """Factor from a Mach number to the reference one."""
    beta_ref = np.sqrt(1.0 - equation.reference_mach**2)
    return np.asarray(np.sqrt(1.0 - mach * mach) / beta_ref)


def moved_nodes(equation: Equation, nodes: Values, mach: Values) -> Values:
    """Node coefficients (…, N) at the reference Mach number; NaN where the rule is refused at any node."""
    m = mach[..., None]
    after = moved(nodes, m, np.asarray(equation.reference_mach), equation.compressibility)
    bad = refused(nodes.real, m.real, equation.reference_mach, equation.compressibility)
    return np.where(np.any(bad, axis=-1, keepdims=True), np.nan, after)


def _nodes(equation: Equation, cp: Values, inputs: Inputs) -> Values:
    rule = equation.quadrature
    nodes = cp @ rule.nodes_of.T + rule.nodes_constant
    if inputs.edge_common is not None:
        nodes = nodes + inputs.edge_common[..., None] * rule.edge_common
    if inputs.edge_loading is not None:
        nodes = nodes + inputs.edge_loading[..., None] * rule.edge_loading
    return np.asarray(nodes)


def _spread(equation: Equation, rows: Values, inputs: Inputs) -> Values:
    """cn, ct, cm about the moment centre (…, 3) from the twelve integrals."""
    body = rows[..., :3]
    if inputs.spacing is not None:
        parts = rows[..., 3:].reshape(*rows.shape[:-1], 3, 3)
        body = body + np.sum(inputs.spacing[..., None] * parts, axis=-2)
    cn, ct, cm0 = body[..., 0], body[..., 1], body[..., 2]
    if equation.in_lengths and inputs.length is not None:
        g = 1.0 / (1.0 + inputs.length)
        cn, ct, cm0 = cn * g, ct * g, cm0 * g * g
    centre = equation.moment_centre + (0.0 if inputs.centre is None else inputs.centre)
    return np.stack(np.broadcast_arrays(cn, ct, cm0 + centre * cn), axis=-1)


def _outputs(equation: Equation, body: Values, inputs: Inputs) -> Values:
    """cn, ct, cm, cl, cd_pressure (…, 5) from cn, ct, cm."""
    cn, ct, cm = body[..., 0], body[..., 1], body[..., 2]
    cl, cd = wind_axes(cn, ct, inputs.alpha)
    return np.stack(np.broadcast_arrays(cn, ct, cm, cl, cd), axis=-1)


def rule_half_width(equation: Equation, cp: Array, mach: Array) -> Array:
    """(P, 3) cn, ct, cm of the chosen rule minus those of Kármán-Tsien (chosen: Prandtl-Glauert)."""
    other = "prandtl-glauert" if equation.compressibility == "karman-tsien" else "karman-tsien"
    nodes = cp @ equation.quadrature.nodes_of.T + equation.quadrature.nodes_constant
    bodies = []
    for name in (equation.compressibility, other):
        values = moved(nodes, mach[:, None], np.asarray(equation.reference_mach), name)
        bad = refused(nodes, mach[:, None], equation.reference_mach, name).any(axis=1, keepdims=True)
        rows = np.where(bad, np.nan, values) @ equation.quadrature.node_weights[0].T
        rows[:, 2] += equation.moment_centre * rows[:, 0]
        bodies.append(rows)
    return np.asarray(bodies[0] - bodies[1])

