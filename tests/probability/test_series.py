"""Batch means: coverage of the mean of correlated series, effective sizes, drift, short records."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.special import stdtrit

from tapband.probability.series import integral_time_scale, series_mean, trend

Array = NDArray[np.float64]


def autoregressive(phi: float, samples: int, records: int, seed: int) -> Array:
    """y_i = φ y_{i−1} + e_i, stationary from the start, (samples, records)."""
    rng = np.random.default_rng(seed)
    noise = rng.standard_normal((samples, records))
    y = np.empty_like(noise)
    y[0] = noise[0] / np.sqrt(1.0 - phi * phi)
    for i in range(1, samples):
        y[i] = phi * y[i - 1] + noise[i]
    return y


def test_batch_means_hold_the_mean_of_a_correlated_record_where_root_n_does_not() -> None:
    """AR(1) with φ = 0.9, n = 2,000, 5,000 records: batch means at least 0.93, s/√n under 0.40."""
    records = autoregressive(0.9, 2_000, 5_000, seed=1)
    found = [series_mean(records[:, [i]]) for i in range(records.shape[1])]
    u = np.sqrt([one.covariance[0, 0] for one in found])
    batches = np.array([one.batches for one in found])
    k = stdtrit(batches - 1.0, 0.975)
    mean = np.abs(records.mean(axis=0))
    assert np.mean(mean <= k * u) >= 0.93
    assert np.mean(mean <= 1.96 * records.std(axis=0, ddof=1) / np.sqrt(2_000)) < 0.40
    assert 9 < np.mean(batches) < 13
    # Such a record is worth n (1 − φ)/(1 + φ) = 105 independent samples and is seldom called short.
    assert np.mean([one.short for one in found]) < 0.10


def test_short_records_say_that_they_are_short() -> None:
    """n = 500 at φ = 0.9 is worth 26 independent samples; 19 records of 20 must say so."""
    records = autoregressive(0.9, 500, 400, seed=2)
    found = [series_mean(records[:, [i]]) for i in range(400)]
    assert np.mean([one.short for one in found]) > 0.95
    note = next(one for one in found if one.short).notes[0]
    assert note.startswith("the record is short: its 500 samples are worth about ")


def test_too_few_samples_are_said_and_taken_as_independent() -> None:
    values = np.random.default_rng(3).normal(size=(12, 2))
    found = series_mean(values)
    assert found.batches == 12
    np.testing.assert_allclose(found.covariance, np.cov(values.T) / 12.0, rtol=1e-12)
    assert found.notes == (
        "12 samples are too few to see correlation in time; they are taken as independent",
    )


@pytest.mark.parametrize("phi", [0.0, 0.5, 0.9])
def test_the_integral_time_scale_is_that_of_the_process(phi: float) -> None:
    """½ + Σ φ^k = ½ (1 + φ)/(1 − φ), exactly, for AR(1)."""
    records = autoregressive(phi, 40_000, 8, seed=4)
    found = np.mean([integral_time_scale(records[:, i]) for i in range(8)])
    # Eight records of 40,000: the estimate of so short a memory is good to a few per cent.
    assert found == pytest.approx(0.5 * (1.0 + phi) / (1.0 - phi), rel=0.06)


def test_covariance_between_columns_survives_the_batches() -> None:
    rng = np.random.default_rng(5)
    a = rng.normal(size=4_000)
    series = np.stack([a, -2.0 * a, np.zeros(4_000)], axis=1)
    found = series_mean(series).covariance
    assert found[0, 1] == pytest.approx(-2.0 * found[0, 0], rel=1e-12)
    assert found[1, 1] == pytest.approx(4.0 * found[0, 0], rel=1e-12)
    assert np.all(found[2] == 0.0)


def test_drift_is_found_and_white_noise_is_not_called_drift() -> None:
    rng = np.random.default_rng(6)
    steady = rng.normal(size=(2_000, 100))
    moving = steady + np.linspace(0.0, 0.5, 2_000)[:, None]
    assert series_mean(moving).drifts.mean() > 0.9
    assert series_mean(steady).drifts.mean() < 0.03
    # A drift of 0.5 along the record, seen to the scatter of a slope: √12 σ/√n = 0.08, three of those.
    np.testing.assert_allclose(series_mean(moving).drift, 0.5, atol=0.35)


def test_a_trend_is_that_of_a_line_through_the_batches() -> None:
    means = np.array([[0.0], [1.0], [2.0], [3.0], [4.0], [5.1]])
    change, p = trend(means)
    # Least squares by hand: Σ x y/Σ x² over x = −2.5 … 2.5 is 17.75/17.5 a batch.
    assert change[0] == pytest.approx(6.0 * 17.75 / 17.5, rel=1e-12)
    assert p[0] < 1e-6
