"""Compressibility rules: a pressure coefficient moved from one Mach number to another.

All three read Cp = Cp₀ / (β + κ Cp₀), β² = 1 − M², with κ of their own:

=================  =======================  ===========================================
Prandtl-Glauert    κ = 0                    Glauert, Proc. R. Soc. A 118 (1928) 113
Kármán-Tsien       κ = M²/(2(1 + β))        Tsien, J. Aeronaut. Sci. 6 (1939) 399
Laitone            κ = M²(1 + M²/5)/(2β)    Laitone, J. Aeronaut. Sci. 18 (1951) 350
=================  =======================  ===========================================
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.stream import critical_cp, stagnation_cp, vacuum_cp

Values = NDArray[Any]
POLE = 0.1
"""A rule is refused where its denominator β + κCp₀ has fallen below this fraction of β."""
USABLE = 0.7
"""Prandtl-Glauert warns from this Mach number (common practice, no source)."""
RULES = ("prandtl-glauert", "karman-tsien", "laitone")


def factors(mach: Values, rule: str) -> tuple[Values, Values]:
    """β and κ of a rule."""
    m2 = mach * mach
    beta = np.sqrt(1.0 - m2)
    match rule:
        case "prandtl-glauert":
            return beta, 0.0 * m2
        case "karman-tsien":
            return beta, 0.5 * m2 / (1.0 + beta)
        case "laitone":
            return beta, 0.5 * m2 * (1.0 + 0.2 * m2) / beta
        case _:
            raise ValueError(f"no compressibility rule is called {rule!r}")


def to_incompressible(cp: Values, mach: Values, rule: str) -> Values:
    """Cp₀ from Cp at a Mach number; arrays broadcast."""
    beta, kappa = factors(mach, rule)
    return np.asarray(beta * cp / (1.0 - kappa * cp))


def to_mach(cp0: Values, mach: Values, rule: str) -> Values:
    """Cp at a Mach number from Cp₀; arrays broadcast."""
    beta, kappa = factors(mach, rule)
    return np.asarray(cp0 / (beta + kappa * cp0))


def moved(cp: Values, mach: Values, reference: Values, rule: str) -> Values:
    """Cp at the reference Mach number from Cp at another."""
    return to_mach(to_incompressible(cp, mach, rule), reference, rule)


def refused(cp: Values, mach: Values, reference: float, rule: str) -> Values:
    """Where the rule does not hold: supersonic, near its pole, or past vacuum at either Mach number."""
    with np.errstate(invalid="ignore", divide="ignore"):
        kappa = factors(mach, rule)[1]
        bad = ~(mach < 1.0) | (1.0 - kappa * cp < POLE) | (1.0 - kappa * cp > 1.0 / POLE)
        cp0 = to_incompressible(cp, mach, rule)
        beta_r, kappa_r = factors(np.asarray(reference, dtype=np.float64), rule)
        bad |= beta_r + kappa_r * cp0 < POLE * beta_r
        bad |= cp < vacuum_cp(mach)
        if reference > 0.0:
            bad |= to_mach(cp0, np.asarray(reference), rule) < vacuum_cp(np.asarray(reference))
    return bad


def concerns(cp: Values, mach: float, reference: float, rule: str) -> tuple[str, ...]:
    """What to distrust in a moved result, in words; empty where nothing is."""
    said = []
    ref = np.asarray(reference, dtype=np.float64)
    if rule == "prandtl-glauert" and max(mach, reference) >= USABLE:
        said.append(f"Prandtl-Glauert at Mach {max(mach, reference):.3f}: usable to about {USABLE}")
    after = moved(cp, np.asarray(mach), ref, rule)
    for name, values, m in (("measured", cp, mach), ("reference", after, reference)):
        if m <= 0.0:
            continue
        if np.nanmax(values) > stagnation_cp(np.asarray(m)) + 1e-9:
            said.append(
                f"a Cp of {np.nanmax(values):.3f} lies above stagnation at the {name} Mach number {m:.3f}"
            )
        if np.nanmin(values) < critical_cp(np.asarray(m)):
            said.append(
                f"a Cp of {np.nanmin(values):.3f} is locally supersonic at the {name} Mach number {m:.3f}"
            )
    return tuple(said)
