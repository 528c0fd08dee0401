"""How long to average: the formula against simulated records, and against the limits of long and short."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import ndtri

from plans import forecast, instruments, planned, targets
from tapband import face
from tapband.questions.averaging import averaging, mean_variance, repeats_needed
from tapband.questions.basis import basis_of, expanded_of


def test_a_long_record_holds_one_value_every_two_time_scales() -> None:
    assert mean_variance(1e4, 0.05) == pytest.approx(2.0 * 0.05 / 1e4, rel=1e-4)
    # An instant is one value.
    assert mean_variance(1e-6, 0.05) == pytest.approx(1.0, rel=1e-4)


def test_variance_of_the_mean_agrees_with_simulated_records() -> None:
    # AR(1) steps of T/50: correlation exp(-t/T) to 1 % of its integral.
    steps, time_scale, record = 1000, 50, 1000
    rng = np.random.default_rng(2)
    phi = np.exp(-1.0 / time_scale)
    value = rng.normal(size=4000)
    total = np.zeros(4000)
    for _ in range(steps):
        value = phi * value + np.sqrt(1.0 - phi * phi) * rng.normal(size=4000)
        total += value
    seen = np.var(total / steps)
    # Four standard errors of a variance of 4,000 values: 4 √(2/4000) = 9 %.
    assert seen == pytest.approx(mean_variance(record, time_scale), rel=0.09)


def test_repeats_show_a_difference_as_often_as_they_say() -> None:
    u, difference, level = 0.004, 0.005, 0.95
    n = repeats_needed(u, difference, level, power=0.9)
    rng = np.random.default_rng(3)
    mean = rng.normal(difference, u * np.sqrt(2.0 / n), 20_000)
    threshold = ndtri(0.975) * u * np.sqrt(2.0 / n)
    assert np.mean(mean > threshold) > 0.9 - 0.01  # 20,000 draws: four standard errors are 0.0085
    fewer = rng.normal(difference, u * np.sqrt(2.0 / (n - 1)), 20_000)
    assert np.mean(fewer > ndtri(0.975) * u * np.sqrt(2.0 / (n - 1))) < 0.9 + 0.0085


def test_the_record_needed_lands_on_the_target() -> None:
    ahead = forecast(fluctuation=0.05, time_scale=0.05, record=10.0)
    basis = basis_of(planned(ahead=ahead, wanted=targets(cl=0.0095, cd=0.0055, cm=0.0027)))
    found = averaging(basis, np.ones(9))
    assert found is not None
    for d in np.flatnonzero(found.record > 0.0):
        share = mean_variance(float(found.record[d]), 0.05)
        total = basis.variance[d].sum() + share * found.single[d] ** 2
        quartic = basis.quartic[d].sum()
        assert expanded_of(total, quartic, 0.95) == pytest.approx(basis.demands.limit[d], rel=1e-6)
    assert np.any(found.record > 0.0)


def test_averaging_is_left_out_without_a_fluctuation() -> None:
    basis = basis_of(planned())
    assert averaging(basis, np.ones(len(basis.demands.limit))) is None


def test_averaging_table_gives_records_samples_and_repeats() -> None:
    plan = face.size(
        planned(instruments()[3:4], ahead=forecast(fluctuation=0.02, time_scale=0.05, record=10.0))
    )
    table = plan.tables["averaging"]
    assert table["effective_samples"].iloc[0] == pytest.approx(1.0 / mean_variance(10.0, 0.05))
    assert (table["u_mean"] < table["u_single"]).all()
    assert (table["u_single"] < table["u_single_bound"]).all()
    assert (table["repeats_needed"] >= 1).all()
    assert any(note.startswith("Averaging: a record of ") for note in plan.notes)
