"""How far may a compressibility rule be trusted?

Truth: the flow about symmetric Joukowski sections of 6 to 18 % at 1 to 6°, exact to the order M²
(``rayleigh_janzen``). Held against it, to the same order, is what each rule of tapband makes of the incompressible
pressures: the slope of lift with M², over lift. Then the source that tapband adds for the choice of the rule, whose
half-width is the difference of the chosen rule and Kármán-Tsien's: does it hold the truth?

*Answer* to this order Prandtl and Glauert's rule is the closest for lift, and too small by 0.03 to 0.10 M² of it (1 %
of lift near M 0.4 at 12 %); Kármán and Tsien's is too large by 0.05 to 0.20 M², Laitone's by 0.12 to 0.49 M². With
either of the first two chosen the source holds the truth at every section and angle, with Laitone's at none: its
difference to Kármán-Tsien's is smaller than what both have in excess. Of M⁴ and beyond, which count from about M 0.5
on, this says nothing.

    python studies/compressibility_rule.py
"""

from __future__ import annotations

import sys
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import product
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

sys.path.insert(0, str(Path(__file__).parents[1] / "tests"))

from rayleigh_janzen import Series, circle, joukowski
from study_figure import drawn, look

from exact_sections import section_of
from tapband.experiment.rule import to_mach

Array = NDArray[np.float64]
RULES = ("prandtl-glauert", "karman-tsien", "laitone")
THICKNESSES = (0.06, 0.09, 0.12, 0.15, 0.18)
ALPHAS = (1.0, 2.0, 4.0, 6.0)
STEP = 1e-3
"""Mach number at which the slope of a rule with M² is taken; its error is of the order of its square."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Found:
    """∂cl/∂M² over cl, each (thicknesses, alphas): the truth, and by rule; the section shown, and its surface."""

    thicknesses: Sequence[float]
    alphas: Sequence[float]
    truth: Array
    rules: dict[str, Array]

    def holds(self, rule: str) -> NDArray[np.bool_]:
        """Where the source for the choice of the rule holds the truth."""
        other = "karman-tsien" if rule != "karman-tsien" else "prandtl-glauert"
        half_width = np.abs(self.rules[rule] - self.rules[other])
        return np.asarray(np.abs(self.rules[rule] - self.truth) <= half_width)


def find(thicknesses: Sequence[float] = THICKNESSES, alphas: Sequence[float] = ALPHAS) -> Found:
    """Slopes of lift."""
    shape = (len(thicknesses), len(alphas))
    truth, rules = np.empty(shape), {rule: np.empty(shape) for rule in RULES}
    for (i, thickness), (j, alpha) in product(enumerate(thicknesses), enumerate(alphas)):
        angle = float(np.radians(alpha))
        flow = joukowski(section_of(thickness, 0.0, 0.0).mu, angle)
        truth[i, j] = flow.lift_slope / flow.lift
        for rule in RULES:
            rules[rule][i, j] = flow.force(ruled(flow, rule), angle)[0] / flow.lift
    return Found(thicknesses=thicknesses, alphas=alphas, truth=truth, rules=rules)


def ruled(flow: Series, rule: str) -> Array:
    """∂Cp/∂M² at M = 0 by a rule."""
    return np.asarray((to_mach(flow.cp, np.asarray(STEP), rule) - flow.cp) / STEP**2)


def known() -> None:
    """What the series is held to before anything is held to it."""
    shoulder = circle()
    i = int(np.argmax(shoulder.speed**2))
    # Half a place off the shoulder of 512: the speed is less by 2e-5 of itself.
    assert abs(shoulder.speed_slope[i] / np.sign(shoulder.speed[i]) - 7.0 / 6.0) < 2e-4
    for thickness, alpha in ((0.06, 2.0), (0.12, 4.0)):
        angle = float(np.radians(alpha))
        section = section_of(thickness, 0.0, 0.0)
        flow = joukowski(section.mu, angle)
        lift, drag = flow.force(flow.cp_slope, angle)
        assert abs(lift - flow.lift_slope) < 1e-8 * flow.lift
        assert abs(drag) < 1e-10
        kaplan = 0.5 * (1.0 + section.thickness / (1.0 + section.thickness))
        assert abs(flow.lift_slope / flow.lift / kaplan - 1.0) < 0.02


def conclude(found: Found) -> None:
    """What the answer says."""
    glauert, tsien, laitone = (found.rules[rule] for rule in RULES)
    assert np.all(glauert < found.truth)
    assert np.all(found.truth < tsien)
    assert np.all(tsien < laitone)
    assert np.all(found.truth - glauert < 0.1)
    assert np.all(found.truth - glauert < tsien - found.truth)
    assert np.all(found.holds("prandtl-glauert"))
    assert np.all(found.holds("karman-tsien"))
    assert not np.any(found.holds("laitone"))


def draw(found: Found, path: Path) -> None:
    """Slopes of lift against thickness; slopes of Cp along the upper surface of one section."""
    with drawn(path, 2) as (left, right):
        j = len(found.alphas) // 2
        per_cent = 100.0 * np.array(found.thicknesses)
        left.plot(per_cent, found.truth[:, j], color="k", lw=2.0, label="exact to M²")
        for i, rule in enumerate(RULES):
            left.plot(per_cent, found.rules[rule][:, j], label=rule, **look(i))
        left.set(
            xlabel="thickness, % of chord", ylabel="∂cl/∂M² over cl", title=f"lift at {found.alphas[j]:g}°"
        )
        left.legend()
        section = section_of(0.12, 0.0, 0.0)
        flow = joukowski(section.mu, float(np.radians(found.alphas[j])), 512)
        upper = flow.z.imag > 0.0
        x = (flow.z.real[upper] - section.x_nose) / section.chord
        right.plot(x, flow.cp_slope[upper], color="k", lw=2.0)
        for i, rule in enumerate(RULES):
            right.plot(x, ruled(flow, rule)[upper], markevery=24, **look(i))
        right.set(xlabel="x, chords", ylabel="∂Cp/∂M²", ylim=(-2.1, 0.7), title="upper surface of 12 %")


def main() -> None:
    """Full size."""
    known()
    found = find()
    for i, thickness in enumerate(found.thicknesses):
        for j, alpha in enumerate(found.alphas):
            rules = ", ".join(f"{rule} {found.rules[rule][i, j]:.3f}" for rule in RULES)
            print(f"{100 * thickness:.0f} % at {alpha:g}°: slope of lift {found.truth[i, j]:.3f}; {rules}")
    conclude(found)
    draw(found, Path(__file__).with_suffix(".svg"))


if __name__ == "__main__":
    main()
