"""Where taps go: judged by true error on sections that were not looked at; bounds kept to the letter."""

from __future__ import annotations

from dataclasses import replace
from importlib import import_module
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest
from scipy.interpolate import CubicSpline

from campaigns import size, source
from exact_sections import section_of
from plans import planned
from tapband import face
from tapband.experiment.bounds import spacing_half_widths
from tapband.experiment.contour import Contour
from tapband.experiment.tap_flows import arc_length, interpolant_weights, tap_flow, tau_of
from tapband.files.frames_plan import layout_tables
from tapband.nouns.errors import QuestionError
from tapband.nouns.plan import ExpectedTable, Layout
from tapband.nouns.source import COMMON, INDEPENDENT
from tapband.questions.basis import basis_of
from tapband.questions.layout import LayoutChoice, apart, cosine_spaced, layout_choice, root_spaced
from tapband.questions.layout_search import Frame
from tapband.questions.new_taps import expected_at, tap_names, with_taps, worst_interval
from tapband.reduction import assemble

HOLES = (
    source("port zero", "tap pressure", size(3.0), COMMON, INDEPENDENT),
    source("tap place", "tap location", size(1.5e-4), COMMON, INDEPENDENT),
)


def study(monkeypatch: pytest.MonkeyPatch) -> ModuleType:
    monkeypatch.syspath_prepend(str(Path(__file__).parents[2] / "studies"))
    return import_module("where_taps_go")


def test_places_found_beat_plain_spacing_on_three_other_sections_and_intervals_hold(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    module = study(monkeypatch)
    found = module.find(draws=16, angles=(-1.0, 5.0, 11.0), iterations=12)
    module.conclude(found)  # the wanted 10 % and 93 %
    module.draw(found, tmp_path / "figure.svg")
    assert (tmp_path / "figure.svg").stat().st_size > 10_000


def small(**more: object) -> LayoutChoice:
    """A layout found with few steps."""
    asked: dict[str, object] = {"taps": 21, "smallest_spacing": 0.01, "rearmost": 0.95, **more}
    return layout_choice(basis_of(planned(HOLES, layout=Layout(**asked))), iterations=4)  # type: ignore[arg-type]


def test_layout_keeps_spacing_rearmost_place_and_fixed_taps() -> None:
    campaign = planned(HOLES)
    fixed = ("T10", "T21", "T33")
    found = small(fixed=fixed)
    assert len(found.names) == len(set(found.names)) == 21
    gaps = np.hypot(np.diff(found.x), np.diff(found.y))
    assert gaps.min() >= 0.01 - 1e-12
    assert found.x.max() <= 0.95 + 1e-9
    assert found.x[[0, -1]] == pytest.approx([0.95, 0.95], abs=1e-9)
    for name in fixed:
        place = campaign.taps.names.index(name)
        assert found.s[found.names.index(name)] == pytest.approx(campaign.taps.s[place], abs=1e-12)


@pytest.fixture(scope="module")
def found() -> LayoutChoice:
    return small()


def test_layouts_are_judged_for_other_numbers_too_and_more_taps_do_better(found: LayoutChoice) -> None:
    numbers = sorted({one.taps for one in found.judged if one.layout == "root"})
    assert len(numbers) > 4
    errors = {one.taps: one.error for one in found.judged if one.layout == "root"}
    assert errors[numbers[0]] > errors[numbers[-1]]
    assert {one.layout for one in found.judged} == {"found", "root", "cosine", "present"}
    assert found.of("found").error <= min(found.of("root").error, found.of("cosine").error)


def test_interval_of_a_layout_is_that_of_the_campaign_with_these_taps() -> None:
    basis = basis_of(planned(HOLES))
    # The present taps put in again: same places, same intervals.
    ratio = float(np.max(basis.expanded() / basis.demands.limit))
    s = np.sort(basis.assembled.s)
    assert worst_interval(basis, s, expected_at(basis, s)) == pytest.approx(ratio, rel=1e-9)


def test_a_table_of_expected_pressures_is_splined_between_its_taps() -> None:
    basis = basis_of(planned(HOLES))
    cp = expected_at(basis, basis.assembled.s)
    table = ExpectedTable(alpha=np.array(basis.raw.alpha), cp=cp)
    campaign = planned(HOLES)
    assert campaign.plan.forecast is not None
    ahead = replace(campaign.plan.forecast, expected=table)
    own = basis_of(replace(campaign, plan=replace(campaign.plan, forecast=ahead)))
    between = 0.5 * (basis.assembled.s[27:-3] + basis.assembled.s[28:-2])
    # Behind the nose 41 taps carry the flow to 0.02 in Cp between them.
    assert expected_at(own, between) == pytest.approx(expected_at(basis, between), abs=0.02)


def test_new_taps_take_modules_in_turn_and_the_scale_of_their_neighbour() -> None:
    basis = basis_of(planned(HOLES))
    s = np.linspace(-0.9, 0.9, 9)
    made = with_taps(basis, s, [f"X{i}" for i in range(9)], expected_at(basis, s))
    assert made.taps.columns["module"] == ("M1", "M2", "M3", "M4", "M1", "M2", "M3", "M4", "M1")
    assert np.all(made.taps.full_scale == 130_000.0)
    assert made.points is not None
    assert made.points.readings.shape == (3, 9)


def test_names_keep_fixed_taps_and_number_the_rest_from_the_nose() -> None:
    s = np.array([-0.5, -0.2, 0.0, 0.1, 0.4, 0.9])
    assert tap_names(s, [("U02", 0.4), ("nose", 0.0)]) == ("L02", "L01", "nose", "U01", "U02", "U03")


def test_plain_layouts_are_those_of_their_names() -> None:
    end = (-np.sqrt(0.97), np.sqrt(0.97))
    section = section_of(0.12, 0.02)
    for row, name in ((root_spaced, "sqrt"), (cosine_spaced, "cosine")):
        wanted = section.taps(31, name, 0.97)  # type: ignore[arg-type]
        assert row(31, end) ** 2 == pytest.approx(wanted.x, abs=1e-9)


def test_too_narrow_a_place_is_refused_in_one_line() -> None:
    contour = Contour.of(*section_of(0.12).contour(401))
    with pytest.raises(
        QuestionError, match=r"^layout.smallest_spacing: must leave room for 29 taps between two"
    ):
        apart(contour, np.linspace(-0.9, 0.9, 31), np.array([0, 30]), 0.07)
    with pytest.raises(QuestionError, match=r"^layout.taps: must be at least 7 here; got 6"):
        small(taps=6)


def test_layout_needs_a_forecast() -> None:
    campaign = planned(HOLES, readings=True, layout=Layout(taps=21))
    plan = replace(campaign.plan, forecast=None)
    with pytest.raises(QuestionError, match=r"^layout: needs a \[forecast\] to place taps for"):
        face.size(replace(campaign, plan=plan))


def test_weights_of_a_spline_are_those_of_its_cardinal_functions() -> None:
    rng = np.random.default_rng(0)
    for count in (4, 5, 9, 40):
        nodes = np.sort(rng.uniform(0.0, 1.0, count))
        at = np.sort(rng.uniform(nodes[0], nodes[-1], 200))
        rows = rng.normal(size=(3, 200))
        wanted = rows @ CubicSpline(nodes, np.eye(count))(at)
        # Rounding of a solve whose random nodes may lie 1e-3 apart.
        assert interpolant_weights(nodes, at, rows) == pytest.approx(wanted, rel=1e-8, abs=1e-8)


def test_quick_weights_and_spacing_terms_are_those_of_the_reduction() -> None:
    campaign = planned(HOLES, readings=True)
    assembled = assemble(campaign)
    order = np.argsort(assembled.s)
    flow = tap_flow(assembled.contour, assembled.points.alpha)
    made = flow.weights(assembled.s[order])
    rule = assembled.sets[0].equation
    cn, ct, cm0 = rule.tap_weights[:, order]
    # Quadrature on 120 panels against quadrature between 401 contour points: 1e-5 of weights of about 0.1.
    assert made.by_cp[0] == pytest.approx(np.array([cn, ct, cm0 + 0.25 * cn]), abs=2e-5)
    cp = assembled.cp[:, order]
    half = np.einsum("jkn,pn->pkj", made.by_cp[1:], cp)
    wanted = spacing_half_widths(rule, assembled.cp, assembled.stream.mach, assembled.points.alpha)
    # The linear rule has corners at the taps, which fixed quadrature points miss by a few per cent of its term.
    assert half[:, :3] == pytest.approx(wanted[:, :3], abs=0.05 * np.abs(wanted[:, :3]).max())


def test_places_turn_into_arc_lengths_and_back() -> None:
    contour = Contour.of(*section_of(0.14, 0.03).contour(401))
    tau = np.linspace(-0.98, 0.98, 41)
    assert tau_of(contour, arc_length(contour, tau)) == pytest.approx(tau, abs=1e-9)


def test_a_frame_leaves_taken_places_where_they_are() -> None:
    frame = Frame(count=7, anchor=np.array([-0.9, 0.1, 0.9]), at=np.array([0, 4, 6]))
    tau = frame.places(np.random.default_rng(1).normal(size=6))
    assert tau[[0, 4, 6]] == pytest.approx([-0.9, 0.1, 0.9])
    assert np.all(np.diff(tau) > 0.0)


def test_tables_hold_the_layout_and_what_the_number_of_taps_buys(found: LayoutChoice) -> None:
    layout, judged = layout_tables(found)
    assert layout.columns.tolist()[:4] == ["tap", "surface", "x", "y"]
    assert layout["surface"].tolist() == ["upper" if s >= 0.0 else "lower" for s in found.s]
    assert judged.columns.tolist() == ["taps", "layout", "worst_ratio", "rms_error_ratio"]
    assert judged["taps"].is_monotonic_increasing
