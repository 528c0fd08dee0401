"""The range each channel will see: margin, fluctuation, full scale."""

from __future__ import annotations

import numpy as np
import pytest

from plans import forecast, instruments, planned
from tapband import face
from tapband.questions.basis import basis_of
from tapband.questions.ranges import PEAKS, ranges


def test_margin_and_fluctuation_widen_a_gauge_range() -> None:
    basis = basis_of(planned(ahead=forecast(margin=0.2, fluctuation=0.01)))
    seen = ranges(basis)
    q = basis.assembled.stream.q[0]
    read = basis.raw.readings
    swing = PEAKS * 0.01 * q
    for i in range(read.shape[1]):
        low, high = read[:, i].min(), read[:, i].max()
        assert seen.expected_lowest[i] == pytest.approx(low, rel=1e-12)
        # A suction is stretched downwards, a pressure upwards; the other end keeps the fluctuation alone.
        assert seen.lowest[i] == pytest.approx((1.2 * low if low < 0.0 else low) - swing, rel=1e-9)
        assert seen.highest[i] == pytest.approx((1.2 * high if high > 0.0 else high) + swing, rel=1e-9)


def test_margin_means_the_same_for_absolute_readings() -> None:
    ahead = forecast(margin=0.2, fluctuation=0.01)
    gauge = ranges(basis_of(planned(ahead=ahead)))
    absolute = ranges(basis_of(planned(ahead=ahead, pressures="relative to vacuum")))
    static = basis_of(planned(ahead=ahead)).raw.channels["p_static"][0]
    taps = len(gauge.names) - 2
    assert absolute.lowest[:taps] == pytest.approx(gauge.lowest[:taps] + static, rel=1e-12)
    assert absolute.highest[:taps] == pytest.approx(gauge.highest[:taps] + static, rel=1e-12)


def test_ranges_grow_with_the_matrix() -> None:
    few, more = (ranges(basis_of(planned(ahead=forecast(alphas)))) for alphas in ((2.0,), (-2.0, 2.0, 8.0)))
    assert np.all(more.lowest[:41] <= few.lowest[:41] + 1e-9)
    assert np.all(more.highest[:41] >= few.highest[:41] - 1e-9)


def test_saturated_taps_are_counted_and_named() -> None:
    plan = face.size(planned(instruments()[3:4], full_scale=1500.0))
    table = plan.tables["ranges"]
    past = table[table["saturates"] == "yes"]
    assert len(past) > 0
    assert (past["utilisation"] > 1.0).all()
    largest = np.maximum(table["lowest"].abs(), table["highest"].abs())
    assert (table["utilisation"] * table["full_scale"]).dropna().tolist() == pytest.approx(
        largest[table["full_scale"].notna()].tolist()
    )
    assert any("may read past their full scale" in note for note in plan.notes)


def test_stream_channels_stand_behind_the_taps() -> None:
    seen = ranges(basis_of(planned()))
    assert seen.names[-2:] == ("p_total", "p_static")
    assert np.all(np.isnan(seen.full_scale[-2:]))
