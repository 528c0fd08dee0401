"""Numerical tolerance, intervals of ordered values, and the comparison of clause 8."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from tapband.probability.coverage import agreement, shortest_of, symmetric_of, tolerance, value_at
from tapband.probability.functional import Quantity, problem_of
from tapband.probability.linearised import propagate
from tapband.probability.montecarlo import run

TOLERANCES = [
    (0.000_32, 5e-6),
    (32.0, 0.5),
    (0.0754, 5e-4),
    (1.0, 0.05),
    (9.96, 0.5),
    (9.94, 0.05),
    (0.0, 0.0),
]
"""u and δ = ½·10^l of two significant digits (JCGM 101:2008, 7.9.2); 9.96 is 10 to two digits."""


@pytest.mark.parametrize(("u", "delta"), TOLERANCES)
def test_tolerance_is_half_a_unit_of_the_second_digit(u: float, delta: float) -> None:
    assert tolerance(u) == pytest.approx(delta, rel=1e-12)


def test_tolerance_of_one_digit_and_of_nothing() -> None:
    """JCGM 101:2008, 9.3.2.1 judges the mass calibration to one digit: δ = 0.005 mg."""
    assert tolerance(0.0539, digits=1) == pytest.approx(0.005)
    assert np.isnan(tolerance(np.nan))


def test_symmetric_interval_of_ordered_values() -> None:
    ordered = np.arange(1000) + 0.5  # the quantile of p is 1000 p
    assert symmetric_of(ordered, 0.95) == pytest.approx((25.0, 975.0))
    assert value_at(ordered[:1], 0.3) == 0.5


def test_shortest_interval_starts_where_the_density_is_greatest() -> None:
    p = (np.arange(100_000) + 0.5) / 100_000
    low, high = shortest_of(-np.log1p(-p), 0.95)  # exponential: [0, −ln 0.05]
    assert low == pytest.approx(0.0, abs=1e-4)
    assert high == pytest.approx(-np.log(0.05), abs=2e-3)  # one position of the ordered values is 2e-4


def line() -> tuple[object, object]:
    problem = problem_of(lambda a, b: a + b, [Quantity("a", 1.0, 0.3), Quantity("b", 2.0, 0.4)])
    return propagate(problem, 0.95), run(problem, 0.95, "auto", 1)


def test_agreement_allows_delta_and_twice_the_numerical_error() -> None:
    linear, drawn = line()
    delta = float(tolerance(linear.u[0, 0]))
    assert agreement(linear, drawn)[0, 0]
    for end in ("low", "high"):
        moved = getattr(drawn, end)
        near = replace(drawn, **{end: moved + 0.99 * delta})
        far = replace(drawn, **{end: moved + 1.01 * delta})
        known = replace(far, **{end + "_sd": np.full_like(moved, 0.01 * delta)})
        assert agreement(linear, near)[0, 0]
        assert not agreement(linear, far)[0, 0]
        assert agreement(linear, known)[0, 0]


def test_an_interval_that_could_not_be_had_confirms_nothing() -> None:
    linear, drawn = line()
    assert not agreement(linear, replace(drawn, low=np.full((1, 1), np.nan)))[0, 0]


def test_an_output_without_an_estimate_has_nothing_to_disagree_on() -> None:
    problem = problem_of(lambda a: (a, a * np.nan), [Quantity("a", 1.0, 0.1)], outputs=("a", "none"))
    assert agreement(propagate(problem, 0.95), run(problem, 0.95, "auto", 1)).tolist() == [[True, True]]
