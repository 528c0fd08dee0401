"""The claimed numerical error bars hold the long-run value as often as they say, over many seeds."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from tap_chain import CURVED, NORMAL_DOMINATED, TapChain
from tapband.nouns.problem import Problem
from tapband.nouns.source import Shape
from tapband.probability.functional import Quantity, problem_of
from tapband.probability.montecarlo import run


def products() -> Problem:
    """Half of it normal, a tenth of curvature, nothing marked linear."""
    return problem_of(
        lambda a, b, c, d: a * b + 0.02 * c * c + d * (1.0 + a),
        [
            Quantity("a", 1.0, 0.05), Quantity("b", 2.0, 0.1), Quantity("c", 1.0, 1.0),
            Quantity("d", 1.0, 0.05, Shape.RECTANGULAR),
        ],
    )  # fmt: skip


PROBLEMS: dict[str, Callable[[], Problem]] = {
    "normal dominated": lambda: TapChain(NORMAL_DOMINATED, taps=20),
    "rectangular, curved": lambda: TapChain(CURVED, taps=20),
    "along a line": products,
}


def inside(problem: Problem, seeds: int, trials: str) -> dict[str, float]:
    """Share of seeds whose ±1.96 sd hold the long-run value, over all outputs, of each number."""
    # A thousand times the trials of a pilot: its own error is a thirtieth of theirs.
    truth = run(problem, 0.95, "128000", 987_654_321)
    runs = [run(problem, 0.95, trials, seed, threads=1) for seed in range(seeds)]
    share = {}
    for name in ("mean", "u", "low", "high", "short_low", "short_high"):
        value = getattr(truth, name)
        error = np.array([getattr(r, name) - value for r in runs])
        sd = np.hypot([getattr(r, name + "_sd") for r in runs], getattr(truth, name + "_sd"))
        # Where an average has no scatter at all, rounding is its error.
        share[name] = float(np.mean(np.abs(error) <= 1.96 * sd + 1e-14 * np.abs(value)))
    return share


@pytest.mark.parametrize("case", PROBLEMS)
def test_error_bars_are_honest(case: str) -> None:
    share = inside(PROBLEMS[case](), 100, "auto")
    # 93-97 % over the long run; of 100 seeds a share of 0.95 scatters by 0.022, less where outputs differ.
    assert all(value > 0.93 - 0.045 for value in share.values()), share
    assert 0.92 < np.mean([share[name] for name in ("mean", "u", "low", "high")]) < 0.99


def test_error_bars_of_plain_trials_are_honest() -> None:
    problem = problem_of(
        lambda a, b: a + b, [Quantity("a", 0.0, 3.0, Shape.RECTANGULAR), Quantity("b", 0.0, 1.0)]
    )
    runs = [run(problem, 0.95, "plain:100000", seed, threads=1) for seed in range(60)]
    truth = run(problem, 0.95, "auto", 1)  # exact: the equation is linear
    for name in ("mean", "u", "low", "high"):
        error = np.array([getattr(r, name) - getattr(truth, name) for r in runs])
        sd = np.array([getattr(r, name + "_sd") for r in runs])
        # 95 %, widened for ten blocks; sixty seeds scatter by 2.8 %.
        assert np.mean(np.abs(error) < 1.96 * sd) > 0.95 - 3 * 0.028, name


@pytest.mark.full
@pytest.mark.parametrize("case", PROBLEMS)
def test_error_bars_are_honest_over_two_thousand_seeds(case: str) -> None:
    share = inside(PROBLEMS[case](), 2_000, "auto")
    # Two standard errors of 2,000 seeds beside the range that is promised.
    assert all(0.93 - 0.01 < value < 0.97 + 0.01 for value in share.values()), share
