"""Questions and plans of a campaign file in SI units, options completed by what they replace."""

from __future__ import annotations

from math import inf, isclose, pi
from pathlib import Path

import numpy as np
import pytest

from bad_input_corpus import GOOD, good
from tapband.files.load import load
from tapband.nouns.campaign import Campaign
from tapband.nouns.plan import Option
from tapband.nouns.source import Scale, Shape

TOML = "campaign.toml"
BASE = '{ name = "module zero", limits = "0.03 % of full scale" }'


def plan_of(folder: Path, *changes: tuple[str, str, str], **files: str) -> Campaign:
    return load(good(folder, *changes, **files))


def option_of(folder: Path, *changes: tuple[str, str, str]) -> Option:
    return plan_of(folder, *changes).plan.slots[0].options[0]


def test_angles_of_questions_are_radians(tmp_path: Path) -> None:
    plan = plan_of(tmp_path).plan
    assert plan.polar.linear_range == (pytest.approx(-4 * pi / 180), pytest.approx(6 * pi / 180))
    assert isclose(plan.polar.same_angle, 0.1 * pi / 180)
    assert plan.targets[0].alpha_range == (0.0, pytest.approx(4 * pi / 180))
    assert (plan.limits[0].lower, plan.limits[0].upper, plan.limits[0].guard) == (-0.06, 0.0, 1.0)


def test_one_sided_limit_is_open_on_the_other(tmp_path: Path) -> None:
    limit = plan_of(tmp_path, (TOML, "lower = -0.06\n", "")).plan.limits[0]
    assert (limit.lower, limit.upper) == (-inf, 0.0)


def test_forecast_is_si(tmp_path: Path) -> None:
    forecast = plan_of(tmp_path).plan.forecast
    assert forecast is not None
    assert (forecast.p_total, forecast.t_total, forecast.mach) == (101300.0, 293.0, 0.15)
    assert (forecast.margin, forecast.fluctuation) == (0.2, 0.02)
    assert (forecast.time_scale, forecast.record, forecast.expected) == (0.05, 10.0, None)


def test_campaign_with_a_forecast_needs_no_points(tmp_path: Path) -> None:
    campaign = plan_of(tmp_path, (TOML, 'table = "points.csv"\n', ""))
    assert campaign.points is None
    assert campaign.sources[0].across_points == "run"


def test_expected_pressures_follow_the_order_of_the_tap_table(tmp_path: Path) -> None:
    names = [line.split(",")[0] for line in (GOOD / "taps.csv").read_text().splitlines()[1:]]
    turned = names[::-1]
    rows = [["6", *[str(i) for i in range(len(names))]], ["-2", *["0.5"] * len(names)]]
    text = "\n".join(",".join(row) for row in [["alpha [deg]", *turned], *rows])
    campaign = plan_of(
        tmp_path, (TOML, "margin =", 'pressures = "expected.csv"\nmargin ='), expected_csv=text
    )
    forecast = campaign.plan.forecast
    assert forecast is not None
    assert forecast.expected is not None
    np.testing.assert_allclose(np.degrees(forecast.expected.alpha), [-2.0, 6.0], rtol=1e-14)
    assert forecast.expected.cp[1].tolist() == list(range(len(names)))[::-1]
    assert "expected.csv" in campaign.inputs


def test_option_inherits_what_it_does_not_state(tmp_path: Path) -> None:
    zero, port = option_of(tmp_path).sources
    assert (zero.acts_on, zero.across_taps, zero.across_points, zero.group) == (
        ("tap pressure",),
        "module",
        "run",
        "scanner",
    )
    assert zero.full_scale == 2500.0
    assert (port.across_taps, port.across_points, len(port.size.terms)) == ("independent", "common", 1)


def test_option_without_a_size_keeps_that_of_the_source(tmp_path: Path) -> None:
    zero = option_of(tmp_path, (TOML, BASE, '{ name = "module zero" }')).sources[0]
    assert zero.size.terms[0].half == pytest.approx(3e-4)
    assert zero.size.terms[0].scale is Scale.FULL_SCALE


def test_option_that_states_a_size_of_another_kind_inherits_no_shape(tmp_path: Path) -> None:
    changes = (
        (
            TOML,
            'limits = "0.03 % of full scale"\nacross',
            'limits = "3 Pa"\nshape = "trapezoidal"\ntop = 0.5\nacross',
        ),
        (TOML, BASE, '{ name = "module zero", standard = "1 Pa" }'),
    )
    size = option_of(tmp_path, *changes).sources[0].size
    assert (size.shape, size.divisor, size.terms[0].half) == (Shape.NORMAL, 1.0, 1.0)


def test_option_that_states_limits_inherits_their_shape(tmp_path: Path) -> None:
    change = (
        TOML,
        'limits = "0.03 % of full scale"\nacross',
        'limits = "3 Pa"\nshape = "triangular"\nacross',
    )
    assert option_of(tmp_path, change).sources[0].size.shape is Shape.TRIANGULAR


def test_option_may_share_otherwise(tmp_path: Path) -> None:
    change = (TOML, BASE, '{ name = "module zero", across_taps = "common", across_points = "common" }')
    zero = option_of(tmp_path, change).sources[0]
    assert (zero.across_taps, zero.across_points) == ("common", "common")


def test_layout_and_wiring(tmp_path: Path) -> None:
    plan = plan_of(tmp_path).plan
    assert plan.layout is not None
    assert plan.wiring is not None
    assert (plan.layout.taps, plan.layout.rearmost, plan.layout.fixed) == (13, 0.95, ("U00",))
    assert plan.layout.smallest_spacing == pytest.approx(2.0 / 400.0, rel=1e-14)
    assert (plan.wiring.modules, plan.wiring.ports) == (2, 8)


def test_lines_of_sources_are_those_of_their_headers(tmp_path: Path) -> None:
    campaign = plan_of(
        tmp_path, (TOML, 'title = "Good campaign"', 'title = """\n[[source]]\n"""  # [[source]]')
    )
    lines = campaign.declared.splitlines()
    assert campaign.plan.lines is not None
    assert list(campaign.plan.lines) == [source.name for source in campaign.sources]
    for name, line in campaign.plan.lines.items():
        assert lines[line - 1] == "[[source]]"
        assert lines[line] == f'name = "{name}"'


def test_target_may_name_points_by_run(tmp_path: Path) -> None:
    change = (TOML, 'alpha_range = ["0 deg", "4 deg"]', 'points = ["R2/a1", "a3"]')
    assert plan_of(tmp_path, change).plan.targets[0].points == ("R2/a1", "a3")


def test_inputs_are_hashed_and_the_text_kept(tmp_path: Path) -> None:
    import hashlib

    campaign = plan_of(tmp_path)
    assert set(campaign.inputs) == {"campaign.toml", "contour.csv", "taps.csv", "points.csv"}
    for name, digest in campaign.inputs.items():
        assert digest == hashlib.sha256((tmp_path / name).read_bytes()).hexdigest()
    assert campaign.declared == (tmp_path / TOML).read_text()
    assert (campaign.name, campaign.title) == ("campaign", "Good campaign")


def test_trials_are_kept_as_text(tmp_path: Path) -> None:
    for stated, kept in (
        ('"auto"', "auto"),
        ("20000", "20000"),
        ('"20000"', "20000"),
        ('"plain:500"', "plain:500"),
    ):
        assert plan_of(tmp_path, (TOML, 'trials = "auto"', f"trials = {stated}")).intervals.trials == kept
