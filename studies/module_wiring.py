"""What do modules cost: the same zero and gain errors, wired to four modules in several ways.

49 taps at x = 0.97 t² on a 12 % section (exact flow at 8°), q = 1.5 kPa, a zero of ±0.05 % of 7 kPa and a gain of
±0.05 % of the reading, each shared by a module. Standard uncertainties of cl and of pressure drag.

*Answer* a zero that all taps share acts on no force; one that each surface has for itself costs four times what
independent ports cost in lift, four blocks three to four times. Interleaving (every next tap on the next module)
brings two modules below a hundredth of that and four to a twentieth, at no cost. A gain does not cancel: it takes the
same share of lift however its module is spread, less with more modules that each see the whole section.

    python studies/module_wiring.py
"""

from __future__ import annotations

import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1] / "tests"))

from study_figure import COLOURS, drawn

from campaigns import TWELVE, campaign, size, source
from tapband.nouns.source import COMMON, INDEPENDENT, Scale, Shape, Source
from tapband.probability.linearised import propagate
from tapband.reduction import assemble

FULL_SCALE, Q = 7000.0, 1500.0
"""[Pa]"""
COUNTS = 1e-4
WIRINGS: dict[str, Callable[[int, int], str]] = {
    "all on one": lambda i, n: "A",
    "independent ports": lambda i, n: "A",
    "upper and lower": lambda i, n: "A" if i < n // 2 else "B",
    "four blocks": lambda i, n: "ABCD"[4 * i // n],
    "two interleaved": lambda i, n: "AB"[i % 2],
    "four interleaved": lambda i, n: "ABCD"[i % 4],
}
"""Module of tap i of n, in order from the lower trailing edge round the nose to the upper."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Cost:
    """Standard uncertainties of cl and of pressure drag from a zero and from a gain."""

    zero: tuple[float, float]
    gain: tuple[float, float]


def find(taps: int = 49, alpha: float = 8.0) -> dict[str, Cost]:
    """By wiring."""
    found = {}
    for name, module in WIRINGS.items():
        across = INDEPENDENT if name == "independent ports" else "by module"
        sources = [
            source("zero", "tap pressure", size(0.0005 * FULL_SCALE, Shape.RECTANGULAR), COMMON, across),
            source("gain", "tap pressure", size(0.0005, Shape.RECTANGULAR, Scale.READING), COMMON, across),
        ]
        found[name] = _cost(sources, [module(i, taps) for i in range(taps)], taps, alpha)
    return found


def _cost(sources: list[Source], modules: list[str], taps: int, alpha: float) -> Cost:
    mach = float(np.sqrt(Q / (0.7 * 101_325.0)))
    made = campaign(
        sources, taps=TWELVE.taps(taps, "sqrt", 0.97), alphas=[alpha], modules=modules, mach=mach,
        p_total=101_325.0 * (1.0 + 0.2 * mach**2) ** 3.5, pressures="relative to static", spacing=False,
    )  # fmt: skip
    by_source = propagate(assemble(made).problem, 0.95).contribution[0]
    zero, gain = ((float(by_source[3, s]), float(by_source[4, s])) for s in (0, 1))
    return Cost(zero=zero, gain=gain)


def conclude(found: dict[str, Cost]) -> None:
    """What the answer says."""
    ports = found["independent ports"].zero
    assert found["all on one"].zero[0] < 1e-12
    assert found["upper and lower"].zero[0] > 3.0 * ports[0]
    assert found["two interleaved"].zero[0] < 0.01 * found["upper and lower"].zero[0]
    assert found["four interleaved"].zero[0] < 0.08 * found["four blocks"].zero[0]
    for name in ("two interleaved", "four interleaved"):
        assert found[name].zero[0] < 0.3 * ports[0], name
        assert found[name].zero[1] < 0.3 * ports[1], name
    # One gain: the same share of lift, ±0.05 % of it, whatever the taps; modules that all see it average.
    whole = found["all on one"].gain[0]
    assert 0.45 < found["four interleaved"].gain[0] / whole < 0.55
    assert 0.65 < found["two interleaved"].gain[0] / whole < 0.76


def draw(found: dict[str, Cost], path: Path) -> None:
    """A bar a wiring: lift on the left, pressure drag on the right."""
    with drawn(path, 2, width=7.4) as axes:
        place = np.arange(len(found))
        for k, (ax, unit, label) in enumerate(
            zip(axes, (1.0, 1.0 / COUNTS), ("cl", "pressure drag, counts"), strict=True)
        ):
            zero, gain = (
                [unit * getattr(cost, kind)[k] for cost in found.values()] for kind in ("zero", "gain")
            )
            ax.barh(place - 0.2, zero, 0.38, color=COLOURS[0], label="zero, ±0.05 % of 7 kPa")
            ax.barh(place + 0.2, gain, 0.38, color=COLOURS[1], hatch="//", label="gain, ±0.05 % of reading")
            ax.set(
                xlabel=f"standard uncertainty of {label}",
                yticks=place,
                yticklabels=list(found) if k == 0 else [],
            )
            ax.invert_yaxis()
        axes[1].legend(loc="lower right")


def main() -> None:
    """Full size."""
    found = find()
    for name, cost in found.items():
        for kind, (cl, cd) in (("zero", cost.zero), ("gain", cost.gain)):
            print(f"{name:18s} {kind}: cl {cl:.6f}, pressure drag {cd / COUNTS:.2f} counts")
    conclude(found)
    draw(found, Path(__file__).with_suffix(".svg"))


if __name__ == "__main__":
    main()
