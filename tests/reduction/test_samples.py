"""Repeated rows of a point as samples of one state."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
import pytest

from campaigns import campaign
from tapband.nouns.campaign import Campaign, Rows
from tapband.probability.linearised import propagate
from tapband.reduction import assemble

SAMPLES = 400


def _sampled(scatter: float, drift_q: float = 0.0, block: int = SAMPLES) -> Campaign:
    """Point P2 has 400 rows of white noise on every tap, in Pa."""
    rng = np.random.default_rng(12)
    c = campaign(alphas=(0.0, 4.0), spacing=False)
    assert c.points is not None
    p = c.points
    readings = p.readings[1] + rng.normal(0.0, scatter, (SAMPLES, p.readings.shape[1]))
    static = p.channels["p_static"][1] + drift_q * rng.normal(0.0, 1.0, SAMPLES)
    all_readings = np.vstack([p.readings[:1], readings])
    channels = {
        "p_total": np.r_[p.channels["p_total"][:1], np.full(SAMPLES, p.channels["p_total"][1])],
        "p_static": np.r_[p.channels["p_static"][:1], static],
    }
    point = np.r_[0, np.ones(SAMPLES, dtype=np.int64)]
    alpha = p.alpha[point]

    def blocks() -> Iterator[Rows]:
        for start in range(0, SAMPLES + 1, block):
            i = slice(start, start + block)
            yield Rows(
                point=point[i], alpha=alpha[i], channels={k: v[i] for k, v in channels.items()},
                readings=all_readings[i],
            )  # fmt: skip

    return replace(
        c,
        points=replace(
            p, readings=np.vstack([p.readings[0], readings.mean(axis=0)]), blocks=blocks,
            channels={k: np.array([v[0], v[1:].mean()]) for k, v in channels.items()},
            counts=np.array([1, SAMPLES]),
        ),
    )  # fmt: skip


def test_scatter_of_white_samples_is_that_of_their_mean() -> None:
    """White noise of 30 Pa on each tap: u = √(Σ w²) 30/q/√400, estimated from batch means."""
    a = assemble(_sampled(30.0))
    index = [one.family.source for one in a.loaded].index("scatter of samples")
    weights = a.sets[0].equation.tap_weights
    expected = np.sqrt((weights**2).sum(axis=1)) * 30.0 / a.stream.q[1] / np.sqrt(SAMPLES)
    linear = propagate(a.problem, 0.95)
    found = linear.contribution[1, :2, index]
    nu = a.loaded[index].family.dof[1]
    # A standard deviation from ν = b − 1 batches is good to 1/√(2ν); three of those.
    np.testing.assert_allclose(found, expected[:2], rtol=3.0 / np.sqrt(2.0 * nu))
    assert np.all(linear.contribution[0, :, index] == 0.0)
    assert not a.loaded[index].family.systematic


def test_a_row_goes_through_the_chain_with_its_own_stream() -> None:
    """Scatter of the static pressure that every tap shares shows in the coefficients through q alone."""
    a = assemble(_sampled(0.0, drift_q=50.0))
    index = [one.family.source for one in a.loaded].index("scatter of samples")
    linear = propagate(a.problem, 0.95)
    relative = linear.contribution[1, 3, index] / abs(a.problem.estimate[1, 3])
    # ∂q/∂p_static over q, times 50 Pa over √400.
    mach2 = a.stream.mach[1] ** 2
    expected = (1.0 + 0.2 * mach2 - 0.7 * mach2) / a.stream.q[1] * 50.0 / np.sqrt(SAMPLES)
    nu = a.loaded[index].family.dof[1]
    assert relative == pytest.approx(expected, rel=3.0 / np.sqrt(2.0 * nu))


def test_blocks_of_rows_change_nothing() -> None:
    whole, parts = assemble(_sampled(30.0)), assemble(_sampled(30.0, block=37))
    for a, b in zip(whole.problem.sensitivity, parts.problem.sensitivity, strict=True):
        np.testing.assert_array_equal(a, b)
