"""Taps or transducers: is lift better served by twice as many taps or by transducers twice as good?

The error of the number of taps is the true one of ``how_many_taps`` (exact flows, root mean square of cl). The
transducers' limits are in per cent of 7 kPa at q = 1.5 kPa, and their errors either independent or one a module,
with four modules wired in blocks; u(cl) averaged over 0, 4 and 8°. Both together, against the number of taps; and
the number of taps from which better transducers pay more than more taps.

*Answer* it depends on who shares an error. One offset a module hardly falls with the number of taps: at ±0.05 %
better transducers (or another wiring, see ``module_wiring``) pay more from some 30 taps on, at ±0.2 % from some 20.
Independent errors fall with the square root of the number of taps: at ±0.2 % better transducers pay more from some
35 on, at ±0.05 % not below 40.

    python studies/taps_or_transducers.py
"""

from __future__ import annotations

import sys
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

sys.path.insert(0, str(Path(__file__).parents[1] / "tests"))

import how_many_taps
from study_figure import drawn, look

from campaigns import TWELVE, campaign, size, source
from tapband.nouns.source import COMMON, INDEPENDENT, Shape
from tapband.probability.linearised import propagate
from tapband.reduction import assemble

Array = NDArray[np.float64]
TAPS = (11, 15, 21, 31, 41, 61, 81)
LIMITS = (0.02, 0.05, 0.1, 0.2, 0.5)
"""[% of 7 kPa]"""
Q = 1500.0
"""[Pa]"""


SHARED = {"independent": INDEPENDENT, "one a module": "by module"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Found:
    """Errors of cl by number of taps (taps,): of the number itself, and u of transducers of ±1 % of 7 kPa."""

    taps: Sequence[int]
    spacing: Array
    per_cent: dict[str, Array]

    def total(self, limit: float, kind: str) -> Array:
        """Both together (taps,) with transducers of ± ``limit`` % of full scale."""
        return np.asarray(np.hypot(self.spacing, limit * self.per_cent[kind]))

    def better_from(self, limit: float, kind: str) -> float:
        """Taps from which half the limits pay more than twice the taps; inf: up to half of all they never do."""
        fine = np.geomspace(self.taps[0], self.taps[-1] / 2, 400)

        def at(n: Array, a: float) -> Array:
            spacing, port = (
                np.exp(np.interp(np.log(n), np.log(self.taps), np.log(v)))
                for v in (self.spacing, self.per_cent[kind])
            )
            return np.hypot(spacing, a * port)

        pays = at(fine, 0.5 * limit) < at(2.0 * fine, limit)
        return float(fine[np.argmax(pays)]) if pays.any() else float("inf")


def find(taps: Sequence[int] = TAPS, thicknesses: Sequence[float] = (0.09, 0.12, 0.15, 0.18)) -> Found:
    """Both errors at each number of taps."""
    spacing = how_many_taps.find(taps, thicknesses).error["contour-cubic"][:, 0]
    # The error of the number of taps passes through zero by chance; it is not taken to fall faster than its trend.
    trend = np.maximum.accumulate(spacing[::-1])[::-1]
    return Found(
        taps=taps,
        spacing=trend,
        per_cent={kind: np.array([_u(count, kind) for count in taps]) for kind in SHARED},
    )


def _u(count: int, kind: str) -> float:
    """u(cl), mean of three angles, of transducers of ±1 % of 7 kPa."""
    mach = float(np.sqrt(Q / (0.7 * 101_325.0)))
    offset = source("offset", "tap pressure", size(70.0, Shape.RECTANGULAR), COMMON, SHARED[kind])
    made = campaign(
        [offset], taps=TWELVE.taps(count, "sqrt", 0.97), alphas=[0.0, 4.0, 8.0], mach=mach,
        p_total=101_325.0 * (1.0 + 0.2 * mach**2) ** 3.5, pressures="relative to static", spacing=False,
    )  # fmt: skip
    return float(np.mean(propagate(assemble(made).problem, 0.95).contribution[:, 3, 0]))


def conclude(found: Found) -> None:
    """What the answer says."""
    turns = {kind: [found.better_from(limit, kind) for limit in LIMITS] for kind in SHARED}
    for row in turns.values():
        assert row == sorted(row, reverse=True), row
    assert all(a < b for a, b in zip(turns["one a module"], turns["independent"], strict=True)), turns
    assert 20.0 < found.better_from(0.05, "one a module") < 41.0
    assert found.better_from(0.05, "independent") > 40.0
    # Independent errors fall with the square root of the number of taps, shared ones hardly.
    growth = np.log(found.taps[-1] / found.taps[0])
    power = {kind: np.log(u[-1] / u[0]) / growth for kind, u in found.per_cent.items()}
    assert -0.8 < power["independent"] < -0.4, power
    assert power["one a module"] > -0.25, power


def draw(found: Found, path: Path) -> None:
    """Both errors together for one size of transducer, and where better transducers begin to pay more."""
    with drawn(path, 2) as (left, right):
        left.loglog(found.taps, found.spacing, color="0.4", lw=0.9, label="exact readings")
        for i, kind in enumerate(SHARED):
            left.loglog(found.taps, found.total(0.05, kind), label=f"±0.05 % of 7 kPa, {kind}", **look(i))
            turns = [found.better_from(limit, kind) for limit in LIMITS]
            right.semilogx(LIMITS, turns, label=kind, **look(i))
        left.set(
            xlabel="taps",
            ylabel="standard error of cl",
            xticks=found.taps,
            xticklabels=[str(n) for n in found.taps],
        )
        left.minorticks_off()
        left.legend()
        right.set(
            xlabel="limits of a transducer, % of 7 kPa", ylabel="taps from which they pay more",
            ylim=(0, None), xticks=LIMITS, xticklabels=[f"{limit:g}" for limit in LIMITS],
        )  # fmt: skip
        right.minorticks_off()
        right.legend()


def main() -> None:
    """Full size."""
    found = find()
    for kind, u in found.per_cent.items():
        print(
            f"{kind}: u(cl) of ±1 % "
            + ", ".join(f"{n} taps {v:.5f}" for n, v in zip(found.taps, u, strict=True))
        )
        for limit in LIMITS:
            print(
                f"  ±{limit:g} %: better transducers pay more from {found.better_from(limit, kind):.0f} taps on"
            )
    conclude(found)
    draw(found, Path(__file__).with_suffix(".svg"))


if __name__ == "__main__":
    main()
