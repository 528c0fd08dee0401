"""Plain Monte Carlo: the published examples, and what must not matter."""

from __future__ import annotations

import tracemalloc
from math import sqrt

import numpy as np
import pytest

from tap_chain import CURVED, TapChain
from tapband.nouns.source import Shape
from tapband.probability import plain
from tapband.probability.functional import Quantity, problem_of
from tapband.probability.histogram import Histogram
from tapband.probability.montecarlo import MonteCarlo, parse_trials, run, sample
from tapband.probability.outcome import NAMES

RECT = Shape.RECTANGULAR


def total(*quantities: Quantity) -> object:
    return problem_of(lambda *x: sum(x), quantities)


def same(a: MonteCarlo, b: MonteCarlo) -> bool:
    return all(
        np.array_equal(getattr(a, name), getattr(b, name), equal_nan=True) for name in (*NAMES, "trials")
    )


JCGM_101_9_2 = {
    "9.2.2 normals": ([Quantity(c, 0.0, 1.0) for c in "abcd"], 2.0, 3.92),
    "9.2.3 rectangles": ([Quantity(c, 0.0, 1.0, RECT) for c in "abcd"], 2.0, 3.88),
    "9.2.4 one large": (
        [*(Quantity(c, 0.0, 1.0, RECT) for c in "abc"), Quantity("d", 0.0, 10.0, RECT)],
        10.1,
        17.0,
    ),
}
"""u and half-width of the 95 % interval as JCGM 101:2008 prints them."""


@pytest.mark.parametrize("case", JCGM_101_9_2)
def test_sums_of_four(case: str) -> None:
    quantities, u, half = JCGM_101_9_2[case]
    r = run(total(*quantities), 0.95, "plain:1000000", 1)
    digit = 0.05 if half > 10 else 0.005
    # Printed digits and four numerical standard deviations.
    assert r.u[0, 0] == pytest.approx(u, abs=0.05 + 4 * r.u_sd[0, 0])
    assert r.low[0, 0] == pytest.approx(-half, abs=digit + 4 * r.low_sd[0, 0])
    assert r.high[0, 0] == pytest.approx(half, abs=digit + 4 * r.high_sd[0, 0])
    # The distribution is symmetric: so is its shortest interval.
    assert r.short_high[0, 0] == pytest.approx(half, abs=digit + 4 * r.short_high_sd[0, 0])


def test_sum_of_squares_at_zero() -> None:
    """JCGM 101:2008, 9.4 at x1 = 0: mean and u 50e-6, shortest 95 % interval [0, 149.8e-6] (recomputed)."""
    r = run(
        problem_of(lambda a, b: a * a + b * b, [Quantity(c, 0.0, 0.005) for c in "ab"]),
        0.95,
        "plain:1000000",
        1,
    )
    assert r.mean[0, 0] == pytest.approx(50e-6, abs=4 * r.mean_sd[0, 0])
    assert r.u[0, 0] == pytest.approx(50e-6, abs=4 * r.u_sd[0, 0])
    assert r.short_low[0, 0] == pytest.approx(0.0, abs=1e-8)  # a bin of the histogram
    assert r.short_high[0, 0] == pytest.approx(149.8e-6, abs=4 * r.short_high_sd[0, 0])


def test_adaptive_run_stops_at_the_tolerance_and_says_so() -> None:
    r = run(total(*JCGM_101_9_2["9.2.2 normals"][0]), 0.95, "plain", 1)
    assert r.reached[0, 0]
    # u = 2.0, δ = 0.05: about 28.5 (u/δ)² = 46,000 trials would do for the ends, ten blocks are the fewest.
    assert 100_000 <= r.trials[0, 0] <= 300_000
    assert all(2 * getattr(r, sd)[0, 0] < 0.05 for sd in ("mean_sd", "u_sd", "low_sd", "high_sd"))


def test_a_run_too_short_for_its_tolerance_says_so() -> None:
    r = run(total(*JCGM_101_9_2["9.2.2 normals"][0]), 0.95, "plain:1000", 1)
    assert not r.reached[0, 0]
    assert r.low[0, 0] == pytest.approx(-3.92, abs=4 * r.low_sd[0, 0])
    # √(0.025 · 0.975/1000)/f, f = φ(1.96)/2: 0.169; a density from 1000 values is good to a third.
    assert r.low_sd[0, 0] == pytest.approx(0.169, rel=0.4)


CHAIN = TapChain(CURVED, alphas=np.linspace(-0.04, 0.14, 11), taps=12)


def test_threads_blocks_and_neighbours_change_no_bit(monkeypatch: pytest.MonkeyPatch) -> None:
    first = run(CHAIN, 0.95, "plain:25000", 3, threads=1)
    assert same(first, run(CHAIN, 0.95, "plain:25000", 3, threads=3))
    monkeypatch.setattr(plain, "POINTS", 3)
    assert same(first, run(CHAIN, 0.95, "plain:25000", 3, threads=2))


def test_order_of_points_changes_no_row() -> None:
    order = np.random.default_rng(0).permutation(11)
    first = run(CHAIN, 0.95, "plain:5000", 3)
    turned = run(TapChain(CURVED, alphas=CHAIN.alpha[order], taps=12), 0.95, "plain:5000", 3)
    for name in NAMES:
        np.testing.assert_array_equal(getattr(turned, name), getattr(first, name)[order])


def test_another_source_changes_no_draw_of_this_one() -> None:
    a, b = Quantity("a", 0.0, 1.0, RECT), Quantity("b", 0.0, 1.0)
    one = sample(problem_of(lambda x: x, [a]), slice(0, 1), 5, 2)
    two = sample(problem_of(lambda y, x: (x, y), [b, a], outputs=("x", "y")), slice(0, 1), 5, 2)
    np.testing.assert_array_equal(one[0, :, 0], two[0, :, 0])


def test_joint_draws_share_what_points_share() -> None:
    p = problem_of(
        lambda a, b: a + b, [Quantity("a", [0.0, 0.0], 3.0), Quantity("b", 0.0, 4.0, shared=False)]
    )
    y = sample(p, slice(0, 2), 1, 0)[..., 0]
    assert y.shape == (2, 10_000)
    # Correlation 9/25; its standard error over 1e4 trials is 0.009.
    assert np.corrcoef(y)[0, 1] == pytest.approx(0.36, abs=0.036)


def test_refused_trials_are_counted_and_left_out() -> None:
    p = problem_of(lambda a: np.where(a < -1.0, np.nan, a), [Quantity("a", 0.0, 1.0)])
    r = run(p, 0.95, "plain:100000", 1)
    assert r.refused[0] == pytest.approx(15_866, abs=4 * sqrt(1e5 * 0.159 * 0.841))  # Φ(−1) of 1e5
    assert r.mean[0, 0] == pytest.approx(0.2876, abs=4 * r.mean_sd[0, 0])  # φ(1)/Φ(1)
    assert r.low[0, 0] > -1.0


def test_moments_that_do_not_exist_are_absent() -> None:
    exists = {}
    for nu in (1.0, 2.0, 3.0, 5.0):
        r = run(total(Quantity("a", 0.0, 1.0, dof=nu), Quantity("b", 0.0, 1.0)), 0.95, "plain:100000", 1)
        exists[nu] = [
            bool(np.isfinite(getattr(r, n)[0, 0])) for n in ("mean", "u", "mean_sd", "u_sd", "low", "high")
        ]
    assert exists == {
        1.0: [False, False, False, False, True, True],
        2.0: [True, False, False, False, True, True],
        3.0: [True, True, True, False, True, True],
        5.0: [True] * 6,
    }


def test_a_negligible_doubtful_source_takes_no_moment_away() -> None:
    r = run(total(Quantity("a", 0.0, 1e-9, dof=1.0), Quantity("b", 0.0, 1.0)), 0.95, "plain:10000", 1)
    assert np.isfinite(r.u[0, 0])


def test_interval_of_student() -> None:
    r = run(total(Quantity("a", 0.0, 1.0, dof=3.0)), 0.95, "plain:1000000", 1)
    assert r.high[0, 0] == pytest.approx(3.182, abs=4 * r.high_sd[0, 0])  # JCGM 100:2008, table G.2: 3.18


def test_output_without_estimate_is_nan_and_reached() -> None:
    p = problem_of(lambda a: (a, a * np.nan), [Quantity("a", 0.0, 1.0)], outputs=("a", "none"))
    r = run(p, 0.95, "plain:20000", 1)
    assert np.isnan([r.mean[0, 1], r.low[0, 1], r.u[0, 1]]).all()
    assert (r.refused[0], r.trials[0, 1]) == (0, 0)
    assert r.reached[0, 1]
    assert np.isfinite(r.low[0, 0])


def test_memory_is_bounded() -> None:
    p = total(*(Quantity(c, 0.0, 1.0) for c in "ab"))
    peaks = []
    for trials in ("plain:200000", "plain:1000000"):
        tracemalloc.start()
        run(p, 0.95, trials, 1, threads=2)
        peaks.append(tracemalloc.get_traced_memory()[1])
        tracemalloc.stop()
    # Five times the trials: only the blocks' own estimates (six numbers each) are kept.
    assert peaks[1] < peaks[0] + 1e6
    assert peaks[1] < 30e6


def test_histogram_quantiles_are_those_of_the_values() -> None:
    x = np.sort(np.random.default_rng(1).standard_normal(200_000))
    h = Histogram(-2.0, 2.0, margin=1.0)
    for part in np.array_split(x, 7):
        h.add(part)
    p = np.array([0.025, 0.5, 0.975])
    # A bin is 12/2^17 = 1e-4 wide.
    np.testing.assert_allclose(h.quantile(p), np.quantile(x, p), atol=1e-4)
    assert h.holds(0.025, 0.975)
    narrow = Histogram(-2.0, 2.0, margin=0.0)
    narrow.add(x)
    assert narrow.holds(0.025, 0.975)
    assert not narrow.holds(0.02, 0.975)  # Φ(−2) = 0.0228 lies below


def test_wild_values_stay_out_of_the_range_but_in_the_count() -> None:
    h = Histogram(-1.0, 1.0, margin=1.0)
    h.add(np.sort(np.array([-1e300, -0.5, 0.0, 0.5, 1e300])))
    assert h.total == 5
    assert h.quantile(0.5) == pytest.approx(0.0, abs=1e-4)
    assert not h.holds(0.1, 0.9)


def test_a_first_block_that_misleads_is_redone(monkeypatch: pytest.MonkeyPatch) -> None:
    """A spread that the first block cannot see: the range of the histogram is widened until it holds the ends."""
    monkeypatch.setattr(Histogram, "holds", lambda self, lower, upper: self._width > 2e-4)
    r = run(total(Quantity("a", 0.0, 1.0)), 0.95, "plain:20000", 1)
    assert r.high[0, 0] == pytest.approx(1.96, abs=4 * r.high_sd[0, 0] + 0.005)


@pytest.mark.parametrize("text", ["many", "-5", "plain:x", "1", "plain:1.5"])
def test_bad_numbers_of_trials_are_refused(text: str) -> None:
    with pytest.raises(ValueError, match=r"^trials: needs"):
        parse_trials(text)


def test_progress_ends_at_its_total() -> None:
    seen: list[tuple[int, int]] = []
    run(CHAIN, 0.95, "plain:20000", 1, progress=lambda done, total: seen.append((done, total)))
    assert seen == sorted(seen)
    assert seen[-1][0] == seen[-1][1]
