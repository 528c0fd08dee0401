"""Where the equation is far from its linear model, seen from the moments of Monte Carlo."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tapband.probability.distributions import variance
from tapband.reduction import Reduced

Array = NDArray[np.float64]
SHIFT, SPREAD = 0.1, 0.1
"""Shift of the mean in u, and relative change of u, from which an output counts as bent."""


def moments(reduced: Reduced) -> tuple[Array, Array]:
    """What Monte Carlo says of each output (P, m): shift of the mean, and its u over that of the linear law.

    0 and 1 where the moments do not exist or were not had.
    """
    linear, drawn = reduced.linear, reduced.montecarlo
    inflation = np.stack([variance(f) for f in reduced.assembled.problem.families], axis=-1)
    expected = np.sqrt(np.sum(linear.contribution**2 * inflation[:, None, :], axis=2))
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = drawn.u / expected
    shift = drawn.mean - linear.estimate
    return np.where(np.isfinite(shift), shift, 0.0), np.where(np.isfinite(ratio), ratio, 1.0)


def bent(reduced: Reduced) -> NDArray[np.bool_]:
    """(P, m) outputs for which trials of the equation are needed."""
    shift, ratio = moments(reduced)
    return np.asarray((np.abs(shift) > SHIFT * reduced.linear.u) | (np.abs(ratio - 1.0) > SPREAD))
