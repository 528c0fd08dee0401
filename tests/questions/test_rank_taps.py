"""Taps ranked: shares that add up, losses that a reduction without the tap confirms, levers."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from campaigns import TWELVE, campaign, every_kind, size, source
from exact_sections import TapPlaces, section_of
from tapband.experiment.chain import evaluate
from tapband.experiment.contour import Contour
from tapband.experiment.inviscid import flow_round
from tapband.experiment.sections import four_digit
from tapband.nouns.campaign import Campaign, Channel, Closure
from tapband.nouns.source import COMMON, INDEPENDENT, Shape
from tapband.questions.rank_order import carriers, places
from tapband.questions.rank_taps import TapRanking, rank_taps
from tapband.reduction import assemble

Array = NDArray[np.float64]
NO_EDGE = source("edge", "trailing-edge coefficient", size(0.0))
"""Declares that nothing is in doubt about the closing of the trailing edge."""
CD = 4
"""Place of cd_pressure among the coefficients."""


def ranked(of: Campaign) -> TapRanking:
    return rank_taps(assemble(of))


def without(of: Campaign, tap: int) -> Campaign:
    excluded = of.taps.excluded.copy()
    excluded[tap] = True
    return replace(of, taps=replace(of.taps, excluded=excluded))


@pytest.mark.parametrize(
    "more",
    [
        {},
        {"integration": "contour-linear"},
        {"integration": "polygon", "trailing_edge": "extrapolate"},
        {"trailing_edge": Closure(cp=0.1, standard=0.02), "compressibility": "karman-tsien"},
        {"trailing_edge": "extrapolate", "compressibility": "prandtl-glauert", "reference_mach": 0.1},
        {"stream": "difference and static", "lost": {(1, 7): True, (1, 20): True}},
    ],
    ids=["cubic", "linear", "polygon", "stated edge", "extrapolated", "lost taps"],
)  # fmt: skip
def test_if_lost_is_what_a_reduction_without_the_tap_gives(more: dict[str, object]) -> None:
    whole = campaign((), taps=TWELVE.taps(25, "cosine", 0.97), alphas=(-3.0, 4.0, 7.0), **more)  # type: ignore[arg-type]
    estimate, found = assemble(whole).problem.estimate, ranked(whole)
    for tap in range(25):
        change = assemble(without(whole, tap)).problem.estimate - estimate
        # Both ways do the same sums in another order: some hundred roundings of numbers of order one.
        np.testing.assert_allclose(found.if_lost[:, :, tap], change, rtol=0.0, atol=1e-12)


def test_if_lost_of_a_tap_at_the_very_edge_is_that_of_a_reduction_without_it() -> None:
    whole = campaign((), taps=TWELVE.taps(21, "cosine", 1.0), alphas=(5.0,))
    estimate, found = assemble(whole).problem.estimate, ranked(whole)
    for tap in (0, 1, 19, 20):
        change = assemble(without(whole, tap)).problem.estimate - estimate
        np.testing.assert_allclose(found.if_lost[:, :, tap], change, rtol=0.0, atol=1e-12)


def test_a_loss_that_no_reduction_accepts_has_no_number() -> None:
    x = np.array([0.9, 0.4, 0.0, 0.3, 0.6, 0.95])
    few = TWELVE.taps_at(x, np.array([False, False, True, True, True, True]))
    found = ranked(campaign((), taps=few, alphas=(2.0,)))
    # Two taps below: neither may go. Four above: any one may.
    assert np.isnan(found.if_lost[0, 0, :2]).all()
    assert np.isfinite(found.if_lost[0, 0, 2:]).all()


def test_shares_of_taps_and_of_what_is_not_at_a_tap_sum_to_one() -> None:
    for more in ({}, {"compressibility": "karman-tsien", "lost": {(1, 5): True}}):
        found = ranked(campaign(every_kind(), taps=TWELVE.taps(31, "cosine", 0.97), **more))  # type: ignore[arg-type]
        np.testing.assert_allclose(found.share.sum(axis=2), 1.0, rtol=0.0, atol=1e-9)


def test_tap_share_is_weight_times_covariance_times_weight() -> None:
    """W_i (V W)_i / u², with V built from scratch: independent, by module and place errors of the taps."""
    sources = [
        source("port", "tap pressure", size(5.0), COMMON, INDEPENDENT),
        source("module", "tap pressure", size(7.0), COMMON, "by module"),
        source("hole", "tap coefficient", size(0.003), COMMON, COMMON),
        NO_EDGE,
    ]
    of = campaign(sources, taps=TWELVE.taps(21, "cosine", 0.97), alphas=(6.0,), spacing=False)
    assembled = assemble(of)
    q = assembled.stream.q[0]
    wired = np.array(of.taps.columns["module"])
    alike = (wired[:, None] == wired[None, :]).astype(float)
    v = np.eye(21) * (5.0 / q) ** 2 + alike * (7.0 / q) ** 2 + np.full((21, 21), 0.003**2)
    found = rank_taps(assembled)
    for j in range(5):
        w = found.weight[0, j]
        part = w * (v @ w)
        np.testing.assert_allclose(found.share[0, j, :-1], part / part.sum(), atol=1e-12)
        assert found.share[0, j, -1] == pytest.approx(0.0, abs=1e-12)
    # Shared errors make it negative where a tap takes out what others bring in.
    assert found.share.min() < 0.0
    worst = found.against[0][found.share[0, :, :-1] < -1e-3]
    assert {assembled.loaded[s].family.source for s in worst.tolist()} <= {"module", "hole"}
    assert np.all(found.against[found.share[..., :-1] > 0.0] == -1)


def test_an_error_shared_by_taps_and_a_stream_channel_is_split_between_them() -> None:
    channel = {"p_static": Channel(columns={"module": "M1"}, full_scale=130_000.0)}
    module = source("module", "tap pressure", size(6.0), COMMON, "by module")
    of = campaign((module, NO_EDGE), taps=TWELVE.taps(21, "cosine", 0.97), channels=channel, spacing=False)
    found = ranked(of)
    np.testing.assert_allclose(found.share.sum(axis=2), 1.0, atol=1e-9)
    # At 8° the stream's side of the module's zero makes more than half of the lift's variance.
    assert found.share[2, 3, -1] > 0.5


def test_leverage_is_the_slope_of_the_coefficient_in_the_place_of_the_tap() -> None:
    of = campaign((), taps=TWELVE.taps(21, "cosine", 0.97), alphas=(5.0,))
    assembled = assemble(of)
    found = rank_taps(assembled)
    equation, inputs = assembled.problem.inputs(0)
    for tap in (3, 10, 12):
        shift = np.zeros((1, 1, 21), dtype=np.complex128)
        shift[..., tap] = 1e-30j
        moved = evaluate(equation, replace(inputs, shift=shift)).imag[0, 0] / 1e-30
        np.testing.assert_allclose(found.leverage[0, :, tap], moved, rtol=1e-9, atol=1e-12)


def naca_0012(power: int) -> Campaign:
    """Inviscid 0012 at 8°, 49 taps at x = 0.97 t^power, nothing but 0.1 mm of place errors on 300 mm."""
    x, y = four_digit(0.0, 0.4, 0.12, 401)
    contour = Contour.of(x, y)
    t = np.arange(1, 25) / 24.0
    stations = np.concatenate([0.97 * t[::-1] ** power, [0.0], 0.97 * t**power])
    upper = np.arange(49) >= 24
    s = contour.place_x(stations, upper)
    px, py = contour.point(s)
    taps = TapPlaces(theta=np.zeros(49), s=s, x=px, y=py, upper=upper)
    cp = flow_round(contour, [np.radians(8.0)]).cp(s)
    place = source("place", "tap location", size(1e-4 / 0.3), COMMON, INDEPENDENT)
    return campaign((place, NO_EDGE), taps=taps, alphas=(8.0,), shape=(x, y), cp=cp, chord=0.3, spacing=False)


def test_six_taps_at_the_nose_carry_nine_tenths_of_the_drag_variance_of_misplaced_taps() -> None:
    of = naca_0012(2)
    share = ranked(of).share[0, CD]
    nearest = np.argsort(np.abs(of.taps.s))[:6]
    # 98.6 % was seen with an independent calculation (methods.md gives 99 %); the bar is 90 %.
    assert share[nearest].sum() > 0.90
    assert share[nearest].sum() == pytest.approx(0.986, abs=0.01)
    assert set(carriers(share[:-1])) <= set(nearest.tolist())


def test_taps_gathered_more_closely_at_the_nose_share_it_out_more() -> None:
    part = []
    for power in (2, 3):
        of = naca_0012(power)
        nearest = np.argsort(np.abs(of.taps.s))[:6]
        part.append(ranked(of).share[0, CD, nearest].sum())
    assert part[1] < part[0]


def test_order_of_taps_changes_no_rank() -> None:
    of = campaign(every_kind(), taps=TWELVE.taps(21, "cosine", 0.97), alphas=(0.0, 5.0))
    assert of.points is not None
    order = np.random.default_rng(3).permutation(21)
    taps = of.taps
    mixed = replace(
        of,
        taps=replace(
            taps,
            names=tuple(taps.names[i] for i in order),
            s=taps.s[order],
            x=taps.x[order],
            y=taps.y[order],
            upper=taps.upper[order],
            full_scale=taps.full_scale[order],
            columns={k: tuple(v[i] for i in order) for k, v in taps.columns.items()},
        ),
        points=replace(of.points, readings=of.points.readings[:, order]),
    )
    np.testing.assert_array_equal(ranked(mixed).rank[..., :-1], ranked(of).rank[..., order])


def test_equal_taps_of_a_symmetric_section_share_their_places() -> None:
    symmetric = section_of(0.12, 0.0)
    port = source("port", "tap pressure", size(5.0, Shape.RECTANGULAR), COMMON, INDEPENDENT)
    of = campaign(
        (port, NO_EDGE),
        section=symmetric,
        taps=symmetric.taps(21, "cosine", 0.97),
        alphas=(0.0,),
        spacing=False,
    )
    rank = ranked(of).rank[0, 0, :-1]
    np.testing.assert_array_equal(rank, rank[::-1])


def test_places_count_equal_values_once_and_missing_ones_last() -> None:
    assert places(np.array([0.2, 0.5, 0.2 + 1e-12, np.nan, -0.1])).tolist() == [2, 1, 2, 5, 4]


def test_carriers_are_the_fewest_that_reach_the_part_asked_for() -> None:
    assert carriers(np.array([0.05, 0.6, -0.1, 0.3])) == [1, 3]
    assert carriers(np.zeros(3)) == []
