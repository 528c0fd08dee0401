"""The accelerated engine: exact where it can be, equal to plain trials, and never wrong in silence."""

from __future__ import annotations

from collections.abc import Callable
from math import sqrt

import numpy as np
import pytest

from tap_chain import CURVED, NORMAL_DOMINATED, TapChain, scaled
from tapband.nouns.source import Shape
from tapband.probability import accelerated
from tapband.probability.coverage import agreement, tolerance
from tapband.probability.functional import Equation, Quantity, problem_of
from tapband.probability.linearised import propagate
from tapband.probability.model import Model
from tapband.probability.montecarlo import MonteCarlo, run
from tapband.probability.outcome import NAMES
from tapband.probability.plain import Plan

RECT = Shape.RECTANGULAR
Q = Quantity


def mass() -> Equation:
    """JCGM 101:2008, 9.3 [mg, kg/m³]."""
    return problem_of(
        lambda m, d, ra, rw, rr: (m + d) * (1 + (ra - 1.2) * (1 / rw - 1 / rr)) - 100_000.0,
        [
            Q("reference mass", 100_000.0, 0.050), Q("added mass", 1.234, 0.020),
            Q("air", 1.20, 0.10 / sqrt(3), RECT), Q("weight", 8000.0, 1000.0 / sqrt(3), RECT),
            Q("reference", 8000.0, 50.0 / sqrt(3), RECT),
        ],
    )  # fmt: skip


def karman_tsien(cp: complex, mach: complex, q: complex) -> object:
    beta = np.sqrt(1.0 - mach * mach)
    return (cp / q) / (beta + mach * mach / (1.0 + beta) * 0.5 * (cp / q))


HARD: dict[str, tuple[Callable[..., object], list[Quantity]]] = {
    "dominant rectangle": (
        lambda a, b, c: a + 0.3 * a * b + 0.2 * c * c + 0.01 * a**3,
        [Q("a", 1.0, 0.1, RECT), Q("b", 1.0, 0.01), Q("c", 0.5, 0.02)],
    ),
    "dominant product": (lambda a, b, c: a * b + c, [Q("a", 0.3, 1.0), Q("b", 0.2, 1.0), Q("c", 0.0, 0.1)]),
    "t with 3 dof": (lambda a, b, c: a + b * c, [Q("a", 0.0, 1.0, dof=3), Q("b", 1.0, 0.3), Q("c", 1.0, 0.2, RECT)]),
    "t with 3 dof that bends": (lambda a, b: a + 0.02 * a * a + b, [Q("a", 0.0, 1.0, dof=3), Q("b", 1.0, 0.3)]),
    "at its minimum": (lambda a, b: a * a + b * b, [Q("a", 0.0, 0.005), Q("b", 0.0, 0.005)]),
    "near its minimum": (
        lambda a, b, c: a * a + b * b + 0.001 * c, [Q("a", 0.0, 0.05), Q("b", 0.01, 0.05), Q("c", 1.0, 1.0)],
    ),
    "a rule near its pole": (karman_tsien, [Q("cp", -2.0, 0.15), Q("mach", 0.65, 0.02, RECT), Q("q", 1.0, 0.01)]),
    "JCGM 101 9.3": (mass().function, [Q(f.source, c, u, f.shape) for f, c, u in zip(
        mass().families, mass().centre[0], [load.sum() for load in mass().loading], strict=True)]),
    "doubtful width": (
        lambda a, b: a * (1 + b), [Q("a", 1.0, 0.1, RECT, reliability=0.3), Q("b", 0.0, 0.03, dof=4.5)],
    ),
    "a step in the tail": (
        lambda a, b: a + 0.3 * np.tanh(40.0 * (a - 1.9)) + b, [Q("a", 0.0, 1.0), Q("b", 0.0, 0.1)],
    ),
    "dominant rectangle, linear": (
        lambda a, b, c: (a + c) * (1 + b),
        [Q("a", 1.0, 0.1, RECT, linear=True), Q("b", 0.0, 0.02), Q("c", 0.0, 0.03, linear=True)],
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", HARD)
def test_hard_budgets_agree_with_plain_trials_within_the_tolerance(case: str) -> None:
    problem = problem_of(*HARD[case])
    got, plain = run(problem, 0.95, "auto", 3), run(problem, 0.95, "plain:400000", 11)
    delta = float(tolerance(propagate(problem, 0.95).u if np.isnan(plain.u_sd[0, 0]) else plain.u)[0, 0])
    assert got.reached[0, 0]
    for name in ("mean", "u", "low", "high"):
        spread = getattr(plain, name + "_sd")[0, 0]
        if np.isfinite(spread):  # Where a moment's estimate has no scatter, there is nothing to compare with.
            # δ of the engine, and four standard deviations of the reference.
            assert abs(getattr(got, name)[0, 0] - getattr(plain, name)[0, 0]) < delta + 4.0 * spread, name


LINEAR = {
    "normals": ([Q(c, 0.0, 1.0) for c in "abcd"], 3.919928),
    "JCGM 101 9.2.3": ([Q(c, 0.0, 1.0, RECT) for c in "abcd"], 3.879407),
    "JCGM 101 9.2.4": ([*(Q(c, 0.0, 1.0, RECT) for c in "abc"), Q("d", 0.0, 10.0, RECT)], 17.015814),
    "one rectangle": ([Q("a", 0.0, 1.0, RECT)], 0.95 * sqrt(3)),
    "t with 5 dof": ([Q("a", 0.0, 2.0, dof=5)], 2.0 * 2.570582),
}
"""Half-widths in closed form (2√3[2 − (3/5)^¼] for four rectangles; t from JCGM 100, table G.2, recomputed)."""


@pytest.mark.parametrize("case", LINEAR)
@pytest.mark.parametrize("marked", [False, True])
def test_a_linear_equation_is_exact_without_luck(case: str, marked: bool) -> None:
    quantities, half = LINEAR[case]
    named = [Q(q.name, q.estimate, q.standard, q.shape, dof=q.dof, linear=marked) for q in quantities]
    r = run(problem_of(lambda *x: sum(x), named), 0.95, "auto", 1)
    # Printed digits; the law itself is known to 1e-6 u.
    np.testing.assert_allclose([r.low[0, 0], r.high[0, 0]], [-half, half], atol=2e-5)
    assert r.reached[0, 0]
    assert max(r.low_sd[0, 0], r.high_sd[0, 0]) < 1e-12


def test_mass_calibration() -> None:
    """JCGM 101:2008, 9.3: u 0.0754, [1.0834, 1.3825], from memory (width to 0.001, ends to 0.003); u 0.07548."""
    r = run(mass(), 0.95, "auto", 1)
    assert r.u[0, 0] == pytest.approx(0.07548, abs=4 * r.u_sd[0, 0])
    assert r.high[0, 0] - r.low[0, 0] == pytest.approx(1.3825 - 1.0834, abs=0.001)
    np.testing.assert_allclose([r.low[0, 0], r.high[0, 0]], [1.0834, 1.3825], atol=0.003)
    assert not agreement(propagate(mass(), 0.95), r)[0, 0]


BUDGETS = {
    "normal dominated": (NORMAL_DOMINATED, "integrated"),
    "rectangular, curved": (CURVED, "integrated"),
    "stream dominates": (scaled(CURVED, q=3.0, gain=3.0), None),
    "nothing linear left": (tuple(e for e in CURVED if e.on not in ("tap", "module")), "line"),
}


@pytest.mark.parametrize("case", BUDGETS)
def test_chain_agrees_with_plain_trials(case: str) -> None:
    errors, method = BUDGETS[case]
    chain = TapChain(errors, taps=20)
    got, plain = run(chain, 0.95, "auto", 1), run(chain, 0.95, "plain:300000", 2)
    assert got.reached.all()
    if method is not None:
        assert method in got.method[0].split("+")
    for name in ("mean", "u", "low", "high"):
        error = np.hypot(getattr(got, name + "_sd"), getattr(plain, name + "_sd"))
        # Twenty comparisons: 4.5 standard deviations once in 7,000 such tests.
        assert np.all(np.abs(getattr(got, name) - getattr(plain, name)) < 4.5 * error), name
    # Shortest ends are judged by the tolerance: plain ones are uncertain themselves.
    delta = tolerance(plain.u)
    for name in ("short_low", "short_high"):
        room = delta + 4.0 * getattr(plain, name + "_sd")
        assert np.all(np.abs(getattr(got, name) - getattr(plain, name)) < room), name


def same(a: MonteCarlo, b: MonteCarlo) -> bool:
    names = (*NAMES, "trials", "reached")
    return a.method == b.method and all(
        np.array_equal(getattr(a, n), getattr(b, n), equal_nan=True) for n in names
    )


MANY = np.linspace(-0.04, 0.14, 33)


@pytest.mark.parametrize(
    "errors", [NORMAL_DOMINATED, scaled(CURVED, q=2.5, gain=2.0)], ids=["smooth", "bent"]
)
def test_threads_blocks_and_order_change_no_bit(errors: tuple, monkeypatch: pytest.MonkeyPatch) -> None:
    first = run(TapChain(errors, MANY, taps=12), 0.95, "auto", 5, threads=1)
    assert same(first, run(TapChain(errors, MANY, taps=12), 0.95, "auto", 5, threads=3))
    monkeypatch.setattr(accelerated, "POINTS", 7)
    assert same(first, run(TapChain(errors, MANY, taps=12), 0.95, "auto", 5, threads=2))
    order = np.random.default_rng(1).permutation(MANY.size)
    turned = run(TapChain(errors, MANY[order], taps=12), 0.95, "auto", 5)
    for name in (*NAMES, "trials"):
        np.testing.assert_array_equal(getattr(turned, name), getattr(first, name)[order])


def test_another_source_without_effect_changes_nothing() -> None:
    f = [Q("a", 1.0, 0.1), Q("b", 2.0, 0.2, RECT)]
    one = run(problem_of(lambda a, b: a * b, f), 0.95, "auto", 2)
    more = [*f, Q("idle", 0.0, 1.0, RECT)]
    two = run(problem_of(lambda a, b, c: a * b + 0.0 * c, more), 0.95, "auto", 2)
    for name in NAMES:
        np.testing.assert_allclose(getattr(two, name), getattr(one, name), rtol=1e-12, atol=1e-15)


def test_fixed_number_of_trials_is_kept() -> None:
    for trials in (100, 2_000, 70_000):
        r = run(TapChain(CURVED, taps=12), 0.95, str(trials), 1)
        assert np.all(r.trials == trials)
    assert r.reached.all()


def test_errors_shrink_with_the_square_root_of_trials() -> None:
    chain = TapChain(scaled(CURVED, q=3.0), taps=12)
    few, many = (run(chain, 0.95, n, 1) for n in ("2000", "32000"))
    ratio = few.low_sd / many.low_sd
    assert np.all(
        (ratio > 3.0) & (ratio < 5.5)
    )  # 4, give or take the doubt of a standard deviation from 2000


def test_refusals_send_a_point_to_plain_trials_and_are_counted() -> None:
    p = problem_of(lambda a, b: np.where(a < -2.0, np.nan, a + b), [Q("a", 0.0, 1.0), Q("b", 0.0, 0.2)])
    r = run(p, 0.95, "auto", 1)
    assert r.method == ("plain",)
    share = r.refused[0] / r.trials[0, 0]
    assert share == pytest.approx(0.02275, abs=4 * sqrt(0.0228 / r.trials[0, 0]))  # Φ(−2)


def test_a_cliff_that_the_pilot_cannot_see_is_noticed() -> None:
    """Beyond 2.8 standard deviations (0.3 % of trials) the output drops: a pilot misses it, a probe does not."""
    drop = problem_of(
        lambda a, b: a + b - 3.0 / (1.0 + np.exp(-200.0 * (a - 2.8))), [Q("a", 0.0, 1.0), Q("b", 0.0, 0.5)]
    )
    r, plain = run(drop, 0.95, "auto", 1), run(drop, 0.95, "plain:1000000", 2)
    assert r.trials[0, 0] >= 8_192
    for name in ("u", "low", "high"):
        assert abs(getattr(r, name)[0, 0] - getattr(plain, name)[0, 0]) < float(tolerance(plain.u)[0, 0]), (
            name
        )


def test_a_false_promise_of_shape_is_checked() -> None:
    """Two linear rectangles exchange their weights with b: their joint law does not scale as one."""
    p = problem_of(
        lambda a, c, b: a * (1.0 - b) + c * b,
        [Q("a", 0.0, 1.0, RECT, linear=True), Q("c", 0.0, 1.0, RECT, linear=True), Q("b", 0.3, 0.25, RECT)],
    )
    r, plain = run(p, 0.95, "auto", 1), run(p, 0.95, "plain:1000000", 2)
    assert "integrated" not in r.method[0]
    for name in ("low", "high"):
        room = float(tolerance(plain.u)[0, 0]) + 3.0 * getattr(plain, name + "_sd")[0, 0]
        assert abs(getattr(r, name)[0, 0] - getattr(plain, name)[0, 0]) < room


def test_an_unreachable_tolerance_is_said() -> None:
    outcome = accelerated.run(Model.of(mass()), Plan(level=0.95, seed=1, cap=100_000))[0]
    assert not outcome.reached[0]
    assert outcome.trials[0] == 100_000


def test_outputs_without_estimate_or_error_are_no_trouble() -> None:
    p = problem_of(
        lambda a, b: (a * b, np.where(a < 1.5, np.nan, a), 7.0 + 0.0 * a, b),
        [Q("a", [1.0, 2.0], 0.1), Q("b", 1.0, 0.1, RECT)],
        outputs=("product", "sometimes", "constant", "b"),
    )
    r = run(p, 0.95, "auto", 1)
    assert np.isnan([r.mean[0, 1], r.low[0, 1]]).all()
    assert r.reached.all()
    np.testing.assert_allclose([r.low[0, 2], r.high[1, 2], r.mean[0, 2]], 7.0, rtol=1e-12)
    assert r.u[0, 2] <= 1e-12
    np.testing.assert_allclose([r.low[0, 3], r.high[0, 3]], [1 - 0.1645448, 1 + 0.1645448], atol=1e-6)


def test_nothing_errs_nothing_is_drawn() -> None:
    r = run(problem_of(lambda a: (a, a * np.nan), [Q("a", 3.0)], outputs=("a", "none")), 0.95, "auto", 1)
    assert (r.mean[0, 0], r.u[0, 0], r.low[0, 0], r.trials[0, 0], r.method) == (3.0, 0.0, 3.0, 0, ("exact",))
    assert np.isnan(r.mean[0, 1])


def test_progress_ends_at_its_total() -> None:
    seen: list[tuple[int, int]] = []
    run(TapChain(NORMAL_DOMINATED, MANY, taps=12), 0.95, "auto", 1, progress=lambda d, t: seen.append((d, t)))
    assert seen[-1] == (33, 33)


def test_other_levels() -> None:
    for level, z in ((0.6827, 1.0), (0.99, 2.5758), (0.999, 3.2905)):
        r = run(problem_of(lambda a, b: a + b, [Q("a", 0.0, 0.6), Q("b", 0.0, 0.8)]), level, "auto", 1)
        assert r.high[0, 0] == pytest.approx(z, abs=1e-4)  # printed digits
