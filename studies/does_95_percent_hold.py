"""Does the 95 % hold?

Simulated tests about sections whose flow is known exactly (``tests/coverage_trials.py``). First with errors drawn as
they are declared: 3,000 tests with 121 taps to the edge and the automatic terms off, 3,000 with 41 taps and them on.
Then without any error: the automatic terms alone, over exact flows of sections of 9 to 21 % with and without camber,
−4 to 12°, 25 to 61 taps, in both layouts (700 flows).

*Answer* yes. Drawn as declared, 95 % intervals hold the truth in 95 % of tests for lift, moment and pressure drag.
With the automatic terms on they hold it in 99 %: those are bounds, and most flows stay well inside. Alone they hold
92 to 93 % of lift and moment and 98 % of pressure drag, and U is one to four times the root mean square error.

    python studies/does_95_percent_hold.py
"""

from __future__ import annotations

import sys
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import get_args

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1] / "tests"))

from study_figure import COLOURS, drawn

from coverage_trials import NAMES, automatic_alone, declared_errors
from exact_sections import LayoutName

TAPS = (25, 31, 37, 43, 49, 55, 61)
PLAIN, BOTH = "errors drawn, 121 taps", "errors drawn and\nautomatic terms, 41 taps"
ALONE = "automatic terms alone,\n{} layout"


@dataclass(frozen=True, slots=True, kw_only=True)
class Found:
    """By kind of test: the share held of each coefficient; by layout: mean U over the rms error."""

    held: dict[str, dict[str, float]]
    ratio: dict[str, dict[str, float]]
    tests: int


def find(tests: int = 3_000, taps: Sequence[int] = TAPS) -> Found:
    """All kinds of test."""
    held = {
        PLAIN: declared_errors(tests=tests, taps=121, rearmost=1.0, automatic=False, seed=5),
        BOTH: declared_errors(tests=tests, taps=41, rearmost=0.97, automatic=True, seed=6),
    }
    ratio = {}
    for layout in get_args(LayoutName):
        held[ALONE.format(layout)], ratio[layout] = automatic_alone(taps=taps, layout=layout)
    return Found(held=held, ratio=ratio, tests=tests)


def conclude(found: Found) -> None:
    """What the answer says; four standard errors are allowed where errors are drawn."""
    room = 4.0 * np.sqrt(0.05 * 0.95 / found.tests)
    assert all(abs(share - 0.95) < 0.01 + room for share in found.held[PLAIN].values()), found.held
    assert all(share > 0.97 - room for share in found.held[BOTH].values()), found.held
    for layout, ratio in found.ratio.items():
        alone = found.held[ALONE.format(layout)]
        assert alone["cl"] >= 0.90, alone
        assert alone["cm"] >= 0.90, alone
        assert alone["cd_pressure"] >= 0.85, alone
        assert max(ratio.values()) < 4.0, ratio


def draw(found: Found, path: Path) -> None:
    """Shares held, with two standard errors where errors are drawn."""
    with drawn(path, width=6.4) as (ax,):
        kinds = list(found.held)
        for i, name in enumerate(NAMES):
            share = np.array([found.held[kind][name] for kind in kinds])
            error = 2.0 * np.sqrt(share * (1.0 - share) / found.tests) * (np.arange(len(kinds)) < 2)
            place = np.arange(len(kinds)) + 0.2 * (i - 1)
            ax.errorbar(
                100.0 * share,
                place,
                xerr=100.0 * error,
                fmt="os^"[i],
                color=COLOURS[i],
                label=name,
                markersize=5,
            )
        ax.axvline(95.0, color="0.5", lw=0.8)
        ax.set(
            xlabel="95 % interval holds the truth, % of tests", yticks=range(len(kinds)), yticklabels=kinds
        )
        ax.set(xlim=(89.0, 100.5))
        ax.invert_yaxis()
        ax.legend(loc="upper left")


def main() -> None:
    """Full size."""
    found = find()
    for kind, shares in found.held.items():
        print(
            " ".join(kind.split())
            + ": "
            + ", ".join(f"{name} {100 * share:.1f} %" for name, share in shares.items())
        )
    for layout, ratio in found.ratio.items():
        print(
            f"{layout}: U over rms error " + ", ".join(f"{name} {value:.1f}" for name, value in ratio.items())
        )
    conclude(found)
    draw(found, Path(__file__).with_suffix(".svg"))


if __name__ == "__main__":
    main()
