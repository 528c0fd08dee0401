"""How long must a point be averaged, and does the interval know when it was too short?

A steady mean flow about a 12 % section at 4° whose angle swings by 0.3° (standard deviation) with a memory: an
autoregressive series whose integral time scale is five samples; each tap adds white noise. Several hundred records
of each length go through the whole chain; the only declared source is what tapband takes from the rows themselves,
``scatter of samples``. Held against the mean that is known, beside an interval from s/√n.

*Answer* the standard error of a mean is s √(2τ/T): with the integral time scale τ known, the record T for a wanted
interval follows, and ten times the record gives a third of the error. Batch means hold the truth in 94 to 97 % of
records from 50 time scales on and in 92 % at 20, and every record of 20 or 50 is warned of as short, hardly one of
500. s/√n holds less than half whatever the length.

    python studies/how_long_to_average.py
"""

from __future__ import annotations

import sys
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

sys.path.insert(0, str(Path(__file__).parents[1] / "tests"))

from study_figure import drawn, look

from campaigns import TWELVE, campaign, size, source
from tapband.nouns.campaign import Campaign, Rows
from tapband.probability.linearised import propagate
from tapband.reduction import assemble

Array = NDArray[np.float64]
TAU = 5.0
"""Integral time scale [samples]."""
MEMORY = (2.0 * TAU - 1.0) / (2.0 * TAU + 1.0)
"""Correlation of neighbours: ½ + Σ φᵏ = (1 + φ)/(2(1 − φ)) = τ."""
SWING, NOISE = np.radians(0.3), 2.0
"""[rad], [Pa]"""
LENGTHS = (20, 50, 100, 200, 500, 1000)
"""Records in integral time scales."""
CL = 3


@dataclass(frozen=True, slots=True, kw_only=True)
class Found:
    """By length of record, each (lengths,): share held by batches and by s/√n, share warned, rms error and mean u."""

    lengths: Sequence[int]
    held: Array
    naive: Array
    warned: Array
    error: Array
    u: Array
    expected: Array
    """s √(2τ/T)."""
    records: int


def find(lengths: Sequence[int] = LENGTHS, records: int = 400, seed: int = 3) -> Found:
    """All lengths."""
    rows = [_at(length, records, seed) for length in lengths]
    held, naive, warned, error, u, expected = np.array(rows).T
    return Found(
        lengths=lengths,
        held=held,
        naive=naive,
        warned=warned,
        error=error,
        u=u,
        expected=expected,
        records=records,
    )


def _at(length: int, records: int, seed: int) -> tuple[float, ...]:
    ideal = campaign(
        [source("edge", "trailing-edge coefficient", size(0.0))], taps=TWELVE.taps(21, "cosine", 1.0),
        alphas=[4.0] * records, mach=0.2, pressures="relative to static", spacing=False,
    )  # fmt: skip
    count = round(length * TAU)
    truth = assemble(ideal).problem.estimate[0, CL]
    series = _series(ideal, count, seed)
    a = assemble(_sampled(ideal, series))
    linear = propagate(a.problem, 0.95)
    error = linear.estimate[:, CL] - truth
    lift = _lift(a.sets[0].equation.tap_weights, float(a.points.alpha[0])) / a.stream.q[0]
    spread = np.std(series @ lift, axis=1, ddof=1)
    held = np.mean(np.abs(error) <= linear.U[:, CL])
    naive = np.mean(np.abs(error) <= 1.96 * spread / np.sqrt(count))
    warned = np.mean(
        [any(key + ":" in text and "short" in text for text in a.warnings) for key in a.points.keys]
    )
    expected = np.sqrt(np.mean(spread**2)) * np.sqrt(2.0 / length)
    return (held, naive, warned, np.sqrt(np.mean(error**2)), np.mean(linear.u[:, CL]), expected)


def _lift(weights: Array, alpha: float) -> Array:
    return np.asarray(np.cos(alpha) * weights[0] - np.sin(alpha) * weights[1])


def _series(ideal: Campaign, count: int, seed: int) -> Array:
    """Readings (records, count, n): the mean, the swing by the slope of Cp with angle, and noise."""
    points = ideal.points
    assert points is not None
    rng = np.random.default_rng([seed, count])
    records, n = points.readings.shape
    step = np.radians(0.01)
    theta = TWELVE.taps(n, "cosine", 1.0).theta
    slope = np.diff(TWELVE.cp(theta, points.alpha[0] + np.array([-step, step])), axis=0)[0] / (2.0 * step)
    q = 0.7 * points.channels["p_static"][0] * 0.2**2
    swing = np.empty((records, count))
    swing[:, 0] = rng.normal(0.0, SWING, records)
    for t in range(1, count):
        swing[:, t] = MEMORY * swing[:, t - 1] + rng.normal(0.0, SWING * np.sqrt(1.0 - MEMORY**2), records)
    noise = rng.normal(0.0, NOISE, (records, count, n))
    return np.asarray(points.readings[:, None, :] + q * swing[..., None] * slope + noise)


def _sampled(ideal: Campaign, series: Array) -> Campaign:
    """The campaign whose points have the rows of the series."""
    points = ideal.points
    assert points is not None
    count = series.shape[1]

    def blocks() -> Iterator[Rows]:
        for p, rows in enumerate(series):
            yield Rows(
                point=np.full(count, p), alpha=np.full(count, points.alpha[p]),
                channels={k: np.full(count, v[p]) for k, v in points.channels.items()}, readings=rows,
            )  # fmt: skip

    counts = np.full(len(series), count)
    return replace(ideal, points=replace(points, readings=series.mean(axis=1), blocks=blocks, counts=counts))


def conclude(found: Found) -> None:
    """What the answer says; four standard errors of a share are allowed beside it."""
    room = 4.0 * np.sqrt(0.06 * 0.94 / found.records)
    at = {length: i for i, length in enumerate(found.lengths)}
    for length, i in at.items():
        if length >= 50:
            assert abs(found.held[i] - 0.955) < 0.015 + room, (length, found.held[i])
            assert found.naive[i] < 0.70, (length, found.naive[i])
            assert abs(found.error[i] / found.expected[i] - 1.0) < 4.0 / np.sqrt(2.0 * found.records) + 0.03
    assert found.held[at[20]] > 0.90 - room
    assert found.warned[at[20]] > 0.9
    assert found.warned[at[200]] < 0.3
    i, j = at[20], at[200]
    assert 0.4 < np.log(found.error[i] / found.error[j]) / np.log(10.0) < 0.6


def draw(found: Found, path: Path) -> None:
    """Share held, and the error with its estimate, against the length of the record."""
    with drawn(path, 2) as (left, right):
        left.semilogx(found.lengths, 100.0 * found.held, label="batch means", **look(0))
        left.semilogx(found.lengths, 100.0 * found.naive, label="s/√n", **look(1))
        left.semilogx(found.lengths, 100.0 * found.warned, label="warned of a short record", **look(2))
        left.axhline(95.0, color="0.5", lw=0.8)
        left.set(ylabel="% of records", ylim=(0.0, 101.0))
        right.loglog(found.lengths, found.error, label="rms error of cl", **look(0))
        right.loglog(found.lengths, found.u, label="mean of u", **{**look(1), "fillstyle": "none"})
        right.loglog(found.lengths, found.expected, color="0.4", lw=0.9, label="s √(2τ/T)")
        for ax in (left, right):
            ax.set(
                xlabel="record, integral time scales", xticks=found.lengths,
                xticklabels=[str(length) for length in found.lengths],
            )  # fmt: skip
            ax.minorticks_off()
        left.legend(loc="upper right", bbox_to_anchor=(1.0, 0.92))
        right.set(yticks=[0.002, 0.005, 0.01], yticklabels=["0.002", "0.005", "0.01"], ylabel="cl")
        right.legend()


def main() -> None:
    """Full size."""
    found = find()
    for i, length in enumerate(found.lengths):
        print(
            f"{length:5d} time scales: held {100 * found.held[i]:.1f} %, by s/√n {100 * found.naive[i]:.1f} %, "
            f"warned {100 * found.warned[i]:.0f} %; rms error {found.error[i]:.5f}, u {found.u[i]:.5f}"
        )
    conclude(found)
    draw(found, Path(__file__).with_suffix(".svg"))


if __name__ == "__main__":
    main()
