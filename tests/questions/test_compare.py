"""Differences between points: what is shared cancels, what is not adds, by hand and against the covariance."""

from __future__ import annotations

import tracemalloc
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest

from campaigns import campaign, every_kind, size, source
from tapband.nouns.campaign import Campaign
from tapband.nouns.source import COMMON, INDEPENDENT, Source
from tapband.questions.between_trials import of_differences
from tapband.questions.compare import Differences, compare
from tapband.questions.latents import Latents, from_arrays, latents_at, to_arrays
from tapband.reduction import assemble

ROUNDING = 1e-14
"""Sums of some hundred products of coefficients near 1, each good to 1e-16."""
CL = 3
TENTH = np.radians(0.1)


def with_configs(made: Campaign, configs: Sequence[str]) -> Campaign:
    assert made.points is not None
    columns = {**made.points.columns, "config": tuple(configs)}
    return replace(made, points=replace(made.points, columns=columns))


def two_runs(sources: Sequence[Source], alphas: Sequence[float], others: Sequence[float]) -> Latents:
    runs = ["R1"] * len(alphas) + ["R2"] * len(others)
    made = campaign(
        [*sources, source("edge", "trailing-edge coefficient", size(0.0))],
        alphas=[*alphas, *others], runs=runs, spacing=False,
    )  # fmt: skip
    return latents_at(assemble(made))


def asked(latents: Latents, a: str, b: str, within: float = TENTH) -> Differences:
    return compare(latents, a, b, within=within, level=0.95)


def test_difference_of_equal_points_with_every_source_common_is_known_exactly() -> None:
    common = [replace(one, across_points=COMMON) for one in every_kind()]
    found = asked(two_runs(common, [4.0], [4.0]), "P1", "P2")
    np.testing.assert_allclose(found.value, 0.0, atol=ROUNDING)
    np.testing.assert_allclose(found.u, 0.0, atol=ROUNDING)
    assert np.all(found.u_independent > 1e-4)


def test_difference_with_nothing_common_is_the_root_sum_of_squares() -> None:
    apart = [replace(one, across_points=INDEPENDENT) for one in every_kind()]
    latents = two_runs(apart, [2.0], [6.0])
    found = asked(latents, "P1", "P2")
    own = [np.diag(latents.covariance(i, i)) for i in (0, 1)]
    np.testing.assert_allclose(found.u[0], np.sqrt(own[0] + own[1]), rtol=1e-12)
    np.testing.assert_allclose(found.u_independent, found.u, rtol=1e-12)


def test_difference_of_mixed_sources_worked_by_hand() -> None:
    """In cl: 0.003 common, 0.002 by run, 0.004 independent.

    Across runs √(2·0.002² + 2·0.004²) = 0.0063246, within one √2·0.004 = 0.0056569, called independent
    √(2·(0.003² + 0.002² + 0.004²)) = 0.0076158.
    """
    sources = [
        source("scale", "cl", size(0.003), COMMON),
        source("zero", "cl", size(0.002), "by run"),
        source("scatter", "cl", size(0.004), INDEPENDENT),
    ]
    latents = two_runs(sources, [0.0, 4.0], [4.0])
    across, within = asked(latents, "P2", "P3"), asked(latents, "P1", "P2")
    assert across.u[0, CL] == pytest.approx(0.0063246, abs=5e-8)
    assert within.u[0, CL] == pytest.approx(0.0056569, abs=5e-8)
    assert across.u_independent[0, CL] == pytest.approx(0.0076158, abs=5e-8)
    shares = across.variance[0, CL] / across.u[0, CL] ** 2
    # zero 8/40, scatter 32/40 of the variance; the common one is gone.
    left = dict(zip(across.sources, shares.tolist(), strict=True))
    assert left["zero"] == pytest.approx(0.2, rel=1e-12)
    assert left["scatter"] == pytest.approx(0.8, rel=1e-12)
    assert left["scale"] == 0.0


def test_difference_agrees_with_the_covariance_of_the_two_points() -> None:
    latents = two_runs(every_kind(), [0.0, 4.0], [4.0, 8.0])
    found = asked(latents, "R1/P2", "R2/P4")
    c = latents.covariance(1, 3)
    expected = latents.covariance(1, 1) + latents.covariance(3, 3) - c - c.T
    np.testing.assert_allclose(found.u[0] ** 2, np.diag(expected), rtol=1e-9)


def test_degrees_of_freedom_are_those_of_what_is_left() -> None:
    """Welch-Satterthwaite by hand: a scatter of ν = 4 common in size to both points, 2·0.004² of the variance,
    and an exact 2·0.003²: ν = 4 (50/32)² = 9.765625."""
    sources = [
        source("scatter", "cl", size(0.004, dof=4.0), INDEPENDENT),
        source("exact", "cl", size(0.003), INDEPENDENT),
        source("gone", "cl", size(0.1, dof=2.0), COMMON),
    ]
    found = asked(two_runs(sources, [4.0], [4.0]), "P1", "P2")
    assert found.dof[0, CL] == pytest.approx(9.765625, rel=1e-9)


def test_runs_are_paired_point_by_point_within_the_tolerance() -> None:
    latents = two_runs(every_kind(), [0.0, 4.0, 8.0], [8.02, 0.05, 4.0])
    found = asked(latents, "R1", "R2")
    assert list(zip(found.a, found.b, strict=True)) == [
        ("R1/P1", "R2/P5"), ("R1/P2", "R2/P6"), ("R1/P3", "R2/P4"),
    ]  # fmt: skip
    assert not found.interpolated.any()
    np.testing.assert_array_equal(found.value[1], latents.estimate[1] - latents.estimate[5])


def test_repeats_of_one_run_are_each_paired_once() -> None:
    latents = two_runs((), [4.0, 4.0], [4.0, 4.0])
    found = asked(latents, "R1", "R2")
    assert sorted(found.a) == ["R1/P1", "R1/P2"]
    assert sorted(found.b) == ["R2/P3", "R2/P4"]


def test_configs_pool_their_repeats() -> None:
    """Means of two on either side: the variance of an independent error halves, 0.004·√(½ + ½)."""
    made = campaign(
        [source("scatter", "cl", size(0.004), INDEPENDENT)], alphas=[4.0] * 4, spacing=False,
    )  # fmt: skip
    latents = latents_at(assemble(with_configs(made, "aabb")))
    found = asked(latents, "a", "b")
    assert found.a == ("R1/P1+R1/P2",)
    contribution = dict(zip(found.sources, np.sqrt(found.variance[0, CL]), strict=True))
    assert contribution["scatter"] == pytest.approx(0.004, rel=1e-12)


def test_interpolation_is_exact_on_a_cubic_and_carries_what_it_may_err() -> None:
    latents = two_runs((), [3.0], [0.0, 2.0, 4.0, 6.0])
    x = np.degrees(latents.alpha)
    cubic = 0.1 * x + 0.01 * x**2 - 0.002 * x**3
    latents = replace(latents, estimate=np.repeat(cubic[:, None], 5, axis=1))
    found = asked(latents, "R1", "R2")
    assert found.interpolated.all()
    np.testing.assert_allclose(found.value, 0.0, atol=1e-14)
    # A parabola through three of the nodes errs by 0.002·(3−0)(3−2)(3−4) = 0.006 on either side.
    np.testing.assert_allclose(found.u, 0.006 / np.sqrt(3.0), rtol=1e-9)


def test_a_shared_angle_error_cancels_between_runs_and_an_own_one_does_not() -> None:
    """At one true angle an independent error of 0.02 deg in each costs √2·0.02 deg times the slope of cl."""
    own, shared = (
        [source("angle", "angle", size(np.radians(0.02)), across)] for across in (INDEPENDENT, COMMON)
    )
    angles = [2.0, 4.0, 6.0]
    found = asked(two_runs(own, angles, angles), "R1", "R2")
    latents = two_runs(shared, angles, angles)
    # On exact flow with the pressures held, cl itself moves by −cd_pressure; the rest is the flow's slope.
    slope = (latents.estimate[2, CL] - latents.estimate[0, CL]) / np.radians(4.0)
    expected = np.sqrt(2.0) * np.radians(0.02) * (slope + latents.estimate[1, 4])
    assert found.equal_angle_u[1, CL] == pytest.approx(expected, rel=1e-9)
    assert found.u[1, CL] < 0.01 * expected
    np.testing.assert_allclose(asked(latents, "R1", "R2").equal_angle_u, 0.0, atol=ROUNDING)


def test_angles_that_differ_within_the_tolerance_are_brought_together_for_one_true_angle() -> None:
    """Exact flow at 4.00 and 4.05 deg: nearly all of the difference is that of the angles."""
    latents = two_runs((), [2.0, 4.0, 6.0], [2.05, 4.05, 6.05])
    found = asked(latents, "R1", "R2")
    assert abs(found.value[1, CL]) > 0.005
    # What is left is the curvature over 0.05 deg and the truncation of the rule.
    assert abs(found.equal_angle_value[1, CL]) < 0.01 * abs(found.value[1, CL])


def test_latents_that_were_stored_answer_as_those_that_were_not() -> None:
    latents = two_runs(every_kind(), [0.0, 4.0, 8.0], [0.0, 4.0, 8.0])
    again = from_arrays(to_arrays(latents))  # type: ignore[arg-type]
    for a, b in (("R1", "R2"), ("P1", "P6")):
        first, second = asked(latents, a, b), asked(again, a, b)
        np.testing.assert_array_equal(first.value, second.value)
        np.testing.assert_array_equal(first.equal_angle_u, second.equal_angle_u)


def test_monte_carlo_confirms_a_difference_and_sees_a_product() -> None:
    """Rectangular ±0.006 in both points, independent: the difference is triangular, with 95 % ends at
    ±0.012 (1 − √0.05) = ±0.0093167, where the normal law says ±0.0096018."""
    rect = source("limits", "cl", size(0.006, shape=every_kind()[1].size.shape), INDEPENDENT)
    made = campaign(
        [rect, source("edge", "trailing-edge coefficient", size(0.0))],
        alphas=[4.0, 4.0], runs=["R1", "R2"], spacing=False,
    )  # fmt: skip
    assembled = assemble(made)
    latents = latents_at(assembled)
    found = asked(latents, "P1", "P2")
    drawn = of_differences(assembled.problem, latents, found, 0.95, 1)
    # The law of the linear model is exact; its quantile is found to 1e-10 of u, damped by 1e-6.
    assert drawn.high[0, CL] == pytest.approx(0.0093167, abs=2e-6)
    assert found.U[0, CL] == pytest.approx(0.0096018, abs=1e-6)
    assert not drawn.agrees(found.value - found.U, found.value + found.U, found.u)[0, CL]


def test_plain_joint_trials_agree_with_the_law_and_its_correction() -> None:
    """20,000 plain trials: an end is good to √(p(1 − p)/N)/f = 0.019 u, here four of those; seeds differ."""
    assembled = assemble(campaign(every_kind(), alphas=[2.0, 6.0], runs=["R1", "R2"]))
    latents = latents_at(assembled)
    found = asked(latents, "P1", "P2")
    quick = of_differences(assembled.problem, latents, found, 0.95, 1)
    plain = of_differences(assembled.problem, latents, found, 0.95, 2, "plain:20000")
    np.testing.assert_allclose(plain.low, quick.low, atol=4.0 * 0.019 * float(found.u.max()))
    assert np.all(np.abs(plain.high - quick.high) < 4.0 * 0.019 * found.u)
    assert np.all(plain.high_sd < 0.04 * found.u)


def test_joint_trials_move_ends_no_more_than_the_tolerance_where_the_chain_is_nearly_linear() -> None:
    runs = ["R1"] * 4 + ["R2"] * 4
    assembled = assemble(campaign(every_kind(), alphas=[0.0, 3.0, 6.0, 9.0] * 2, runs=runs))
    latents = latents_at(assembled)
    found = asked(latents, "R1", "R2")
    drawn = of_differences(assembled.problem, latents, found, 0.95, 1)
    away = np.abs(drawn.high - (found.value + found.U)) / found.u
    # Rectangular and trapezoidal sources shorten the ends by some hundredths of u; nothing moves them more.
    assert np.nanmax(away) < 0.15


def test_comparing_runs_never_forms_points_times_points() -> None:
    """Peak memory grows with the points, not with their square: ten times the points, less than 20 times."""

    def peak(points: int) -> int:
        alphas = np.linspace(-4.0, 10.0, points).tolist()
        latents = two_runs(every_kind()[:6], alphas, alphas)
        tracemalloc.start()
        asked(latents, "R1", "R2", within=1e-6)
        used = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
        return used

    assert peak(400) < 20 * peak(40)
