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
from tapband.experiment.rowwise import in_pieces
from tapband.experiment.rule import moved, refused
from tapband.experiment.stream import Stream, solve
from tapband.nouns.symbols import MEASURED

Array = NDArray[np.float64]
Values = NDArray[Any]

REFERENCE = tuple(f"{name}_ref" for name in MEASURED)


@dataclass(frozen=True, slots=True, kw_only=True)
class Inputs:
    """Quantities of a test point (SI, rad, chords); leading axes broadcast.

    ``shift`` (…, n) how far each tap sits along the contour from its nominal place; ``extra`` (…, n) added to
    Cp; ``length`` relative error of the chord; ``edge_common`` and ``edge_loading`` added to the closing
    values; ``added`` (…, m) added to the coefficients.
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
    """(3, n): cn, ct, cm₀ per unit tap coefficient, closure included."""
    constant: Array
    edge_common: Array
    edge_loading: Array

    @classmethod
    def of(
        cls,
        quadrature: Quadrature,
        *,
        arrangement: str,
        pressures: str,
        moment_centre: float,
        in_lengths: bool,
        compressibility: str = "none",
        reference_mach: float = 0.0,
    ) -> Equation:
        """The equation of a set of live taps, its weights gathered on the taps."""
        rows = quadrature.node_weights[0]
        return cls(
            quadrature=quadrature,
            arrangement=arrangement,
            pressures=pressures,
            moment_centre=moment_centre,
            in_lengths=in_lengths,
            compressibility=compressibility,
            reference_mach=reference_mach,
            tap_weights=rows @ quadrature.nodes_of,
            constant=rows @ quadrature.nodes_constant,
            edge_common=rows @ quadrature.edge_common,
            edge_loading=rows @ quadrature.edge_loading,
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
    return solve(equation.arrangement, equation.pressures, inputs.channels, inputs.mach_shift, inputs.q_shift)


def tap_coefficients(reading: Values, stream: Stream) -> Values:
    """Cp = (p − p_static)/q at each tap (…, n)."""
    return np.asarray((reading + stream.offset[..., None]) * (1.0 / stream.q)[..., None])


def evaluate(equation: Equation, inputs: Inputs) -> Values:
    """Coefficients (…, m).

    A state in which the compressibility rule does not hold gives NaN reference coefficients.
    """
    stream = stream_of(equation, inputs)
    cp = tap_coefficients(inputs.reading, stream)
    if inputs.extra is not None:
        cp = cp + inputs.extra
    if inputs.shift is not None:
        cp = at_nominal(cp, inputs.shift, equation.quadrature)
    if equation.on_coefficients:
        rows = integrals(equation, cp, inputs)
        parts = [rows]
        if equation.compressibility != "none":
            parts.append(rows * prandtl_glauert(equation, stream.mach)[..., None])
    else:
        nodes = _nodes(equation, cp, inputs)
        after = moved_nodes(equation, nodes, stream.mach)
        parts = [in_pieces(values, equation.quadrature.node_weights[0].T) for values in (nodes, after)]
    y = np.concatenate([_coefficients(equation, rows, inputs) for rows in parts], axis=-1)
    return y if inputs.added is None else np.asarray(y + inputs.added)


def integrals(equation: Equation, cp: Values, inputs: Inputs) -> Values:
    """cn, ct, cm₀ (…, 3) from placed Cp (…, n)."""
    rows = in_pieces(cp, equation.tap_weights.T) + equation.constant
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
    nodes = in_pieces(cp, rule.nodes_of.T) + rule.nodes_constant
    if inputs.edge_common is not None:
        nodes = nodes + inputs.edge_common[..., None] * rule.edge_common
    if inputs.edge_loading is not None:
        nodes = nodes + inputs.edge_loading[..., None] * rule.edge_loading
    return np.asarray(nodes)


def _coefficients(equation: Equation, rows: Values, inputs: Inputs) -> Values:
    """cn, ct, cm, cl, cd_pressure (…, 5) from the integrals cn, ct, cm₀ (…, 3)."""
    cn, ct, cm0 = rows[..., 0], rows[..., 1], rows[..., 2]
    if equation.in_lengths and inputs.length is not None:
        g = 1.0 / (1.0 + inputs.length)
        cn, ct, cm0 = cn * g, ct * g, cm0 * g * g
    centre = equation.moment_centre + (0.0 if inputs.centre is None else inputs.centre)
    cl, cd = wind_axes(cn, ct, inputs.alpha)
    return np.stack(np.broadcast_arrays(cn, ct, cm0 + centre * cn, cl, cd), axis=-1)


def turn(equation: Equation, alpha: Array) -> Array:
    """(P, 5, 3) from the integrals cn, ct, cm₀ to cn, ct, cm, cl, cd_pressure; alpha (P,) [rad]."""
    matrix = np.zeros((alpha.size, 5, 3))
    matrix[:, 0, 0] = matrix[:, 1, 1] = matrix[:, 2, 2] = 1.0
    matrix[:, 2, 0] = equation.moment_centre
    matrix[:, 3, 0] = matrix[:, 4, 1] = np.cos(alpha)
    matrix[:, 4, 0] = np.sin(alpha)
    matrix[:, 3, 1] = -matrix[:, 4, 0]
    return matrix
