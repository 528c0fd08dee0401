"""What is seen on the samples of a point: clipping and drift by name, and how much the record is worth."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from campaigns import campaign
from tapband.nouns.campaign import Campaign, Rows
from tapband.reduction import assemble

Array = NDArray[np.float64]
SAMPLES = 600


def sampled(readings: Array, alpha: Array, full_scale: float = 130_000.0) -> Campaign:
    """One point whose rows are given, readings (SAMPLES, 41) [Pa] and alpha (SAMPLES,) [rad]."""
    ideal = campaign(alphas=(4.0,), spacing=False, full_scale=full_scale)
    points = ideal.points
    assert points is not None

    def blocks() -> Iterator[Rows]:
        for start in range(0, SAMPLES, 128):
            i = slice(start, start + 128)
            channels = {k: np.full(len(alpha[i]), v[0]) for k, v in points.channels.items()}
            point = np.zeros(len(alpha[i]), dtype=np.int64)
            yield Rows(point=point, alpha=alpha[i], channels=channels, readings=readings[i])

    return replace(
        ideal,
        points=replace(
            points, readings=readings.mean(axis=0)[None], alpha=np.array([alpha.mean()]), blocks=blocks,
            counts=np.array([SAMPLES]),
        ),
    )  # fmt: skip


def noisy(seed: int = 1) -> tuple[Array, Array]:
    ideal = campaign(alphas=(4.0,)).points
    assert ideal is not None
    rng = np.random.default_rng(seed)
    return ideal.readings[0] + rng.normal(0.0, 30.0, (SAMPLES, 41)), np.full(SAMPLES, ideal.alpha[0])


def test_a_steady_record_is_worth_its_samples_and_draws_no_warning() -> None:
    assembled = assemble(sampled(*noisy()))
    assert assembled.samples is not None
    (mean,) = assembled.samples.series
    assert mean is not None
    assert assembled.samples.warnings == ()
    assert np.all(mean.effective > 0.7 * SAMPLES)


def test_taps_at_full_scale_are_counted_and_named() -> None:
    readings, alpha = noisy()
    top = readings[:, 7].max() - 20.0
    readings[:, 7] = np.minimum(readings[:, 7], top)
    readings[:, [i for i in range(41) if i != 7]] = np.minimum(
        np.delete(readings, 7, axis=1), top - 1.0e-3 * top
    )
    clipped = int(np.sum(readings[:, 7] >= top * (1.0 - 1e-4)))  # what screening calls full scale
    assembled = assemble(sampled(readings, alpha, full_scale=float(top)))
    assert assembled.samples is not None
    assert assembled.samples.warnings[-1] == (
        f"R1/P1: clipped at full scale, of {SAMPLES} samples: T08 in {clipped}; "
        "its mean and its scatter are cut off"
    )


def test_a_drift_names_the_coefficients_that_move() -> None:
    readings, alpha = noisy()
    # The angle creeps by 0.5 deg: cd_pressure by cl times that, cl hardly at held pressures.
    drift = np.radians(0.5) * np.linspace(-0.5, 0.5, SAMPLES)
    assembled = assemble(sampled(readings, alpha + drift))
    assert assembled.samples is not None
    (said,) = (text for text in assembled.samples.warnings if "drift" in text)
    assert said.startswith("R1/P1: drift over the record: ")
    assert "cd_pressure by +0.0" in said
    assert "cn" not in said
