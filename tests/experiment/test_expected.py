"""Expected readings lead back, through the chain that reduces a test, to the pressures they come from."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from campaigns import campaign, size, source
from tapband.experiment.chain import tap_coefficients
from tapband.experiment.contour import Contour
from tapband.experiment.expected import expected_cp, expected_readings
from tapband.experiment.inviscid import flow_round, limits_said
from tapband.experiment.rule import to_mach
from tapband.experiment.stream import solve
from tapband.nouns.campaign import Campaign
from tapband.nouns.errors import QuestionError
from tapband.nouns.plan import ExpectedTable, Forecast, Option, Plan, Slot

ALPHA = tuple(np.radians([-4.0, 0.0, 6.0]))


def planned(mach: float = 0.3, expected: ExpectedTable | None = None, **of: object) -> Campaign:
    """A campaign with a forecast at 95 kPa."""
    forecast = Forecast(alpha=ALPHA, p_total=95_000.0, t_total=290.0, mach=mach, expected=expected)
    return replace(campaign(**of), plan=Plan(forecast=forecast))  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("stream", "pressures"),
    [
        ("total and static", "relative to vacuum"),
        ("total and static", "relative to static"),
        ("total and static", "relative to total"),
        ("difference and static", "relative to p_ambient"),
        ("dynamic and mach", "relative to vacuum"),
        ("dynamic and mach", "relative to static"),
    ],
)
def test_readings_reduce_to_the_expected_coefficients(stream: str, pressures: str) -> None:
    one = planned(stream=stream, pressures=pressures)
    points = expected_readings(one)
    state = solve(stream, pressures, points.channels)
    # Rounding of 95 kPa over q = 5.6 kPa.
    assert tap_coefficients(points.readings, state) == pytest.approx(expected_cp(one).cp, abs=1e-12)
    assert state.mach == pytest.approx(np.full(3, 0.3), abs=1e-12)


def test_readings_that_are_coefficients_are_the_expected_ones() -> None:
    one = planned(stream="mach", pressures="pressure coefficient")
    points = expected_readings(one)
    assert np.array_equal(points.readings, expected_cp(one).cp)
    assert list(points.channels) == ["mach"]


def test_pressures_are_the_inviscid_ones_moved_by_the_campaigns_rule() -> None:
    one = planned(mach=0.5, compressibility="karman-tsien")
    flow = flow_round(Contour.of(one.section.x, one.section.y), np.array(ALPHA))
    got = expected_cp(one)
    assert np.array_equal(got.cp, to_mach(flow.cp(one.taps.s), np.asarray(0.5), "karman-tsien"))
    assert got.notes == (
        *limits_said(flow, 0.5),
        "Expected pressures are moved from incompressible flow to Mach 0.5 by the rule karman-tsien.",
    )


def test_campaign_without_a_rule_is_told_which_one_moved_its_pressures() -> None:
    assert expected_cp(planned()).notes[-1] == (
        "Expected pressures are moved from incompressible flow to Mach 0.3 by the rule prandtl-glauert; "
        "the campaign chooses none."
    )


def test_inviscid_pressures_come_near_those_of_the_exact_section() -> None:
    one = planned(mach=1e-4)
    exact = campaign(alphas=np.degrees(ALPHA), mach=1e-4, stream="mach", pressures="pressure coefficient")
    assert exact.points is not None
    truth = exact.points.readings
    # The panel method's own 1 % of the range of Cp.
    assert np.max(np.abs(expected_cp(one).cp - truth) / np.ptp(truth, axis=1)[:, None]) < 0.01


def test_matrix_past_the_range_of_the_rule_is_refused_with_its_angles() -> None:
    with pytest.raises(QuestionError) as caught:
        expected_cp(planned(mach=0.85, compressibility="laitone"))
    assert str(caught.value) == (
        "forecast: inviscid pressures must lie within the range of the rule laitone; got Mach 0.85 at alpha "
        "-4, 0, 6 deg; leave these angles out, lower mach, or give a table"
    )


def test_campaign_without_a_forecast_is_told_so() -> None:
    with pytest.raises(QuestionError, match=r"^forecast: needs a \[forecast\]; got none; add one"):
        expected_readings(campaign())


def test_own_table_is_taken_as_it_stands_and_interpolated_between_its_angles() -> None:
    grid = np.radians([-4.0, 2.0, 6.0])
    table = ExpectedTable(alpha=grid, cp=np.outer([1.0, 4.0, 7.0], np.ones(41)))
    got = expected_cp(planned(expected=table))
    assert got.cp[:, 7] == pytest.approx([1.0, 3.0, 7.0], abs=1e-12)  # 0° lies two thirds of the way
    assert got.notes == (
        "Expected pressures are those of the campaign's own table, taken to hold at the Mach number.",
        "At alpha 0 deg they are interpolated linearly between the angles of the table.",
    )


def test_points_carry_every_column_that_a_source_shares_by() -> None:
    swapped = Option(name="other", cost=1.0, sources=(source("zero", "angle", size(0.1), "by shift"),))
    one = planned(sources=(source("zero", "angle", size(0.1), "by entry"),))
    one = replace(
        one, plan=replace(one.plan, slots=(Slot(name="s", replaces=("zero",), options=(swapped,)),))
    )
    points = expected_readings(one)
    assert points.keys == ("forecast/F01", "forecast/F02", "forecast/F03")
    assert {name: points.columns[name] for name in ("entry", "shift", "run")} == dict.fromkeys(
        ("entry", "shift", "run"), ("forecast",) * 3
    )
    assert points.t_total == pytest.approx([290.0] * 3)
    assert points.alpha == pytest.approx(ALPHA)


def test_reference_column_stands_at_its_mean_or_at_the_total_pressure_where_nothing_was_read() -> None:
    one = planned(stream="total and static", pressures="relative to p_ambient")
    assert one.points is not None
    read = expected_readings(one).channels["p_ambient"]
    assert np.array_equal(read, one.points.channels["p_ambient"])
    unread = expected_readings(replace(one, points=None)).channels["p_ambient"]
    assert np.array_equal(unread, np.full(3, 95_000.0))
