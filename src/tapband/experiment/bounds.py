"""Half-widths of what the choice of a method leaves open at given pressures.

Each is a number a point, taken from its own readings: the finite number of taps, the closing of the trailing
edge, the compressibility rule. They bound an error; none is corrected.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.chain import Equation, moved_nodes, prandtl_glauert, turn
from tapband.experiment.rowwise import each_row
from tapband.experiment.rule import moved, refused

Array = NDArray[np.float64]


def spacing_half_widths(equation: Equation, cp: Array, mach: Array, alpha: Array) -> Array:
    """(P, m, 3) half-widths of finite tap spacing in every coefficient, signed alike across coefficients.

    The chosen rule minus the linear one (linear chosen: minus the cubic), and a third of the chosen rule
    minus itself on every second tap, for both halves. cp (P, n) with zeros at dead taps; alpha (P,) [rad].
    """
    rule = equation.quadrature
    nodes = each_row(cp, rule.nodes_of.T) + rule.nodes_constant
    results = [nodes]
    if equation.compressibility == "prandtl-glauert":
        results.append(nodes * prandtl_glauert(equation, mach)[:, None])
    elif equation.compressibility != "none":
        results.append(moved_nodes(equation, nodes, mach))
    to_five = turn(equation, alpha)
    terms = rule.node_weights[1:].reshape(9, -1).T
    rows = [to_five @ each_row(part, terms).reshape(-1, 3, 3).swapaxes(1, 2) for part in results]
    return np.concatenate(rows, axis=1)


def edge_half_widths(equation: Equation, cp: Array) -> tuple[Array, Array]:
    """Limits of the common closing value and of the rear loading (P,), from Cp (P, n).

    Half the difference of the rear taps; for the common value the step from their mean to the mean of the
    linear extrapolations where that is larger.
    """
    rule = equation.quadrature
    half = 0.5 * (cp[:, rule.rear[0]] - cp[:, rule.rear[1]])
    step = each_row(cp, (rule.rear_extrapolated - rule.rear_mean)[:, None])[:, 0]
    return np.maximum(np.abs(half), np.abs(step)), half


def rule_half_widths(equation: Equation, cp: Array, mach: Array, alpha: Array) -> Array:
    """(P, m, 1) the chosen rule minus Kármán-Tsien (chosen: Prandtl-Glauert); NaN where one is refused."""
    chosen = equation.compressibility
    other = "prandtl-glauert" if chosen == "karman-tsien" else "karman-tsien"
    nodes = each_row(cp, equation.quadrature.nodes_of.T) + equation.quadrature.nodes_constant
    reference = np.asarray(equation.reference_mach)
    results = []
    for name in (chosen, other):
        bad = refused(nodes, mach[:, None], equation.reference_mach, name).any(axis=1, keepdims=True)
        results.append(np.where(bad, np.nan, moved(nodes, mach[:, None], reference, name)))
    rows = each_row(results[0] - results[1], equation.quadrature.node_weights[0].T)
    five = np.einsum("pmk,pk->pm", turn(equation, alpha), rows)
    return np.concatenate([np.zeros_like(five), five], axis=1)[:, :, None]
