"""Do intervals of differences, slopes and zero-lift angles hold the truth, and what if errors are called
independent?

Simulated two-run tests about a section whose flow is known exactly (tests/two_run_trials.py), errors drawn as
declared. Writes what_cancels.svg and asserts the conclusion: intervals that let shared errors cancel hold the
truth in 93 to 98 % of tests; called independent, those of differences are two to three times too wide and that
of the zero-lift angle misses.

    python studies/what_cancels.py
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1] / "tests"))

from two_run_trials import Shares, simulated

TESTS = 3_000
FIGURE = Path(__file__).with_suffix(".svg")


def conclude(tests: int, seed: int = 3) -> Shares:
    """Simulate, and assert the conclusion; bounds of 93 to 98 % leave room for a hundred tests and more."""
    found = simulated(tests, seed)
    room = 3.0 * np.sqrt(0.05 * 0.95 / tests)
    for name, share in found.held.items():
        assert 0.95 - max(room, 0.02) <= share <= 0.95 + max(room, 0.03), (name, share)
    for name in ("difference of cl", "difference of cd_pressure"):
        assert found.naive_width[name] > 2.0 * found.width[name], name
    assert found.naive["zero-lift angle"] < 0.90
    return found


def draw(found: Shares, tests: int, path: Path) -> None:
    """Shares held by either interval, with three standard errors, beside the ratio of their widths."""
    import matplotlib as mpl
    from matplotlib.backends.backend_svg import FigureCanvasSVG
    from matplotlib.figure import Figure

    mpl.rcParams["svg.hashsalt"] = "what cancels"
    names = list(found.held)
    place = np.arange(len(names))
    figure = Figure(figsize=(7.0, 3.4), layout="constrained")
    FigureCanvasSVG(figure)
    left, right = figure.subplots(1, 2, sharey=True, width_ratios=(3, 2))
    rows = (
        (found.held, "shared errors cancel", "o", "#1b5e8c"),
        (found.naive, "called independent", "s", "#b5651d"),
    )
    for shares, label, marker, colour in rows:
        values = 100.0 * np.array([shares[name] for name in names])
        error = 3.0 * np.sqrt(values * (100.0 - values) / tests)
        left.errorbar(values, place, xerr=error, fmt=marker, color=colour, label=label, capsize=2)
    left.axvspan(93.0, 98.0, color="0.9", zorder=0)
    left.axvline(95.0, color="0.6", lw=0.8, zorder=1)
    left.set(xlabel="interval holds the truth, % of tests", yticks=place, yticklabels=names)
    left.invert_yaxis()
    figure.legend(loc="outside upper center", ncols=2, fontsize=8)
    ratio = [found.naive_width[name] / found.width[name] for name in names]
    right.barh(place, ratio, color="#b5651d", height=0.5)
    right.axvline(1.0, color="0.6", lw=0.8)
    right.set(xlabel="width if called independent,\nover width")
    figure.savefig(path, metadata={"Date": None})


def main() -> None:
    """Full size."""
    found = conclude(TESTS)
    draw(found, TESTS, FIGURE)
    print(f"{TESTS} two-run tests: share held, share held if called independent, ratio of widths")
    for name in found.held:
        ratio = found.naive_width[name] / found.width[name]
        print(f"{name:28s} {100 * found.held[name]:5.1f} % {100 * found.naive[name]:6.1f} % {ratio:6.2f}")


if __name__ == "__main__":
    main()
