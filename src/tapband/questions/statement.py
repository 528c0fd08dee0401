"""A result in words.

*Source* JCGM 100:2008, 7.2.3 and 7.2.4: what is stated with an expanded uncertainty.
"""

from __future__ import annotations

import numpy as np

from tapband.nouns.symbols import MEASURED
from tapband.reduction import Reduced


def statements(reduced: Reduced) -> dict[str, list[str]]:
    """For each point, by its key, one sentence a coefficient."""
    keys = reduced.assembled.points.keys
    return {
        key: [_sentence(reduced, p, j) for j, name in enumerate(reduced.outputs) if name in MEASURED]
        for p, key in enumerate(keys)
    }


def _sentence(reduced: Reduced, p: int, j: int) -> str:
    name, linear = reduced.outputs[j], reduced.linear
    value, u, level = linear.estimate[p, j], linear.u[p, j], reduced.campaign.intervals.level
    if not np.isfinite(value):
        return f"{name} has no value at this point."
    percent = f"{100 * level:g} %"
    if not reduced.agrees[p, j]:
        drawn = reduced.montecarlo
        low, high = drawn.low[p, j], drawn.high[p, j]
        d = decimals(0.5 * (high - low))
        return (
            f"{name} = {value:.{d}f} with a {percent} coverage interval from {low:.{d}f} to {high:.{d}f} by "
            f"Monte Carlo (JCGM 101); the linearised interval ±{linear.U[p, j]:.{d}f} is not confirmed."
        )
    if u == 0.0:
        return f"{name} = {value:.6g}; no declared error acts on it."
    d = decimals(linear.U[p, j])
    dof = linear.dof[p, j]
    known = "the t-distribution" if np.isfinite(dof) and dof < 100 else "the normal distribution"
    freedom = f" for ν = {dof:.0f} degrees of freedom" if np.isfinite(dof) and dof < 100 else ""
    return (
        f"{name} = {value:.{d}f} ± {linear.U[p, j]:.{d}f}, where the number after ± is an expanded "
        f"uncertainty U = k·u with u = {u:.{decimals(u)}f} and k = {linear.k[p, j]:.2f} from {known}{freedom}, "
        f"and defines an interval with a level of confidence of about {percent}."
    )


def decimals(uncertainty: float) -> int:
    """Decimals that show an uncertainty to two significant digits, from 1 to 9."""
    if not np.isfinite(uncertainty) or uncertainty <= 0.0:
        return 6
    return int(min(max(1 - np.floor(np.log10(uncertainty)), 1), 9))
