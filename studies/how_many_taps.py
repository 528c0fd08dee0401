"""How many taps does a section need, and does the interval know?

Exact flow about sections of 9 to 21 % (with and without camber), −4 to 12°, read without any error by taps at
x = 0.97 t². The error that is left is that of the finite number of taps and of the trailing edge; the automatic
sources bound it. Root mean squares over all flows against the number of taps.

*Answer* with the cubic rule the lift error falls with about the cube of the number of taps, to 0.0013 in cl at 31 and
to 4 counts of pressure drag at 41; past 61 more taps gain nothing, for the gap behind the rearmost one is what is
left. The interval is wider than the error at every number. Straight lines between taps (the polygon) need twice as
many taps for the same lift.

    python studies/how_many_taps.py
"""

from __future__ import annotations

import sys
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import product
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

sys.path.insert(0, str(Path(__file__).parents[1] / "tests"))

from study_figure import drawn, look

from campaigns import campaign
from exact_sections import section_of
from tapband.probability.linearised import propagate
from tapband.reduction import assemble

Array = NDArray[np.float64]
NAMES = ("cl", "cm", "cd_pressure")
COLUMNS = [3, 2, 4]
TAPS = (15, 21, 31, 41, 61, 81, 121)
RULES = ("contour-cubic", "polygon")


@dataclass(frozen=True, slots=True, kw_only=True)
class Found:
    """By rule: root mean square errors and mean expanded uncertainties (taps, 3) of cl, cm, cd_pressure."""

    taps: Sequence[int]
    error: dict[str, Array]
    U: dict[str, Array]


def find(taps: Sequence[int] = TAPS, thicknesses: Sequence[float] = (0.09, 0.12, 0.15, 0.18, 0.21)) -> Found:
    """Errors and intervals at each number of taps."""
    error, expanded = {}, {}
    for rule in RULES:
        rows = [_at(count, rule, thicknesses) for count in taps]
        error[rule], expanded[rule] = (np.array(part) for part in zip(*rows, strict=True))
    return Found(taps=taps, error=error, U=expanded)


_section = lru_cache(section_of)


def _at(count: int, rule: str, thicknesses: Sequence[float]) -> tuple[Array, Array]:
    errors, wide = [], []
    for thickness, camber in product(thicknesses, (0.0, 0.03)):
        section = _section(thickness, camber)
        made = campaign(
            section=section, taps=section.taps(count, "sqrt", 0.97), alphas=[-4.0, 0.0, 4.0, 8.0, 12.0],
            mach=0.2, pressures="relative to static", integration=rule,
        )  # fmt: skip
        linear = propagate(assemble(made).problem, 0.95)
        assert made.points is not None
        exact = section.coefficients(made.points.alpha)
        truth = np.column_stack([exact.cl, exact.cm, np.zeros(exact.cl.size)])
        errors.append(linear.estimate[:, COLUMNS] - truth)
        wide.append(linear.U[:, COLUMNS])
    return np.sqrt(np.mean(np.concatenate(errors) ** 2, axis=0)), np.mean(np.concatenate(wide), axis=0)


def conclude(found: Found) -> None:
    """What the answer says; bounds leave room for fewer sections."""
    cubic, polygon = (dict(zip(found.taps, found.error[rule], strict=True)) for rule in RULES)
    assert cubic[31][0] < 0.003
    assert cubic[41][2] < 8e-4
    order = np.log(cubic[21][0] / cubic[41][0]) / np.log(41 / 21)
    assert order > 2.0, order
    assert cubic[31][0] < 1.5 * polygon[61][0]
    assert np.all(found.U["contour-cubic"] > found.error["contour-cubic"])
    if 121 in cubic:
        assert cubic[121][0] > 0.5 * cubic[81][0]


def draw(found: Found, path: Path) -> None:
    """Errors and intervals of lift and pressure drag against the number of taps."""
    with drawn(path, 2) as axes:
        for ax, (j, label, unit) in zip(
            axes, ((0, "cl", 1.0), (2, "pressure drag, counts", 1e4)), strict=True
        ):
            for i, rule in enumerate(RULES):
                style = look(i)
                ax.loglog(found.taps, unit * found.error[rule][:, j], label=f"{rule}: rms error", **style)
                ax.loglog(
                    found.taps,
                    unit * found.U[rule][:, j],
                    label=f"{rule}: U",
                    **{**style, "fillstyle": "none"},
                )
            ax.set(xlabel="taps", ylabel=label, xticks=found.taps, xticklabels=[str(n) for n in found.taps])
            ax.minorticks_off()
        axes[0].legend()


def main() -> None:
    """Full size."""
    found = find()
    conclude(found)
    draw(found, Path(__file__).with_suffix(".svg"))
    for rule in RULES:
        print(f"{rule}: rms error of cl, cm, cd_pressure, then mean U")
        for count, error, wide in zip(found.taps, found.error[rule], found.U[rule], strict=True):
            numbers = " ".join(f"{value:.5f}" for value in (*error, *wide))
            print(f"{count:4d} taps  {numbers}")


if __name__ == "__main__":
    main()
