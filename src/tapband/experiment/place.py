"""Cp at the nominal place of a tap, from Cp where the tap really is."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.quadrature import Quadrature
from tapband.experiment.rowwise import in_pieces

Values = NDArray[Any]


def at_nominal(cp: Values, shift: Values, rule: Quadrature) -> Values:
    """Cp (…, n) at the nominal places of taps that sit ``shift`` (…, n) [chords] further along the contour.

    Second order in the shift; the derivatives are those of the cubic through the readings.
    """
    slope = in_pieces(cp, rule.slope.T)
    slope += rule.slope_constant
    moved = (in_pieces(cp, rule.curvature.T) + rule.curvature_constant) * (0.5 * shift)
    moved -= slope
    moved *= shift
    moved += cp
    return np.asarray(moved)
