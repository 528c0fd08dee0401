"""Simulated two-run tests with known truth, for what lies between points.

Each test is two runs of one polar: config "a" as the section stands, config "b" as if its flow were turned by
a little. Errors are drawn as declared; those of a test are shared by both its runs, those of a run by its
points. All tests stand in one campaign, so that they are assembled once.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from campaigns import TWELVE, campaign, size, source
from exact_sections import TapPlaces
from tapband.nouns.campaign import Campaign
from tapband.nouns.plan import Polar
from tapband.nouns.source import INDEPENDENT, Scale, Shape
from tapband.questions.compare import compare
from tapband.questions.fit import Fits, fits
from tapband.questions.latents import Latents, latents_at
from tapband.reduction import assemble

Array = NDArray[np.float64]
ALPHAS = (-3.0, -1.0, 1.0, 3.0, 5.0, 7.0)
TURN = np.radians(0.4)
"""How much config "b" turns the flow."""
PORT, ZERO, GAIN, PLACE = 5.0, 4.0, 0.004, 2e-4
"""Pa, Pa (half-width), 1 (half-width), chords."""
STATIC, ENCODER, SETTING = 10.0, 0.04, 0.02
"""Pa, degrees, degrees."""
LEVEL = 0.95


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Shares:
    """Shares of tests whose interval holds the truth, and the mean half-widths, by what was asked."""

    held: dict[str, float]
    naive: dict[str, float]
    width: dict[str, float]
    naive_width: dict[str, float]


def simulated(tests: int, seed: int) -> Shares:
    """Differences at 3 degrees of the two runs, lift slope and zero-lift angle of the first.

    The naive interval calls every error independent between points.
    """
    rng = np.random.default_rng(seed)
    taps = TWELVE.taps(61, "cosine", 1.0)
    ideal = _two_runs(tests, taps)
    latents = latents_at(assemble(_misread(ideal, taps, rng)))
    assert ideal.points is not None
    exact = _exact(ideal.points.alpha, _turned(tests))
    asked = _differences(latents, exact, tests) | _fitted(latents, exact, ideal.points.alpha)
    held, naive, width, naive_width = {}, {}, {}, {}
    for name, (error, half, half_naive) in asked.items():
        held[name] = float(np.mean(np.abs(error) <= half))
        naive[name] = float(np.mean(np.abs(error) <= half_naive))
        width[name], naive_width[name] = float(np.mean(half)), float(np.mean(half_naive))
    return Shares(held=held, naive=naive, width=width, naive_width=naive_width)


Asked = dict[str, tuple[Array, Array, Array]]
"""Errors, half-widths and naive half-widths (tests,) of what is asked."""


def _differences(latents: Latents, exact: Array, tests: int) -> Asked:
    at = ALPHAS.index(3.0)
    rows = []
    for i in range(tests):
        a, b = (2 * i * len(ALPHAS) + at, (2 * i + 1) * len(ALPHAS) + at)
        found = compare(latents, latents.keys[a], latents.keys[b], within=0.0, level=LEVEL)
        truth = exact[a] - exact[b]
        naive = 1.96 * found.u_independent[0, [3, 2, 4]]
        rows.append((found.value[0, [3, 2, 4]] - truth, found.U[0, [3, 2, 4]], naive))
    columns = [np.stack(column) for column in zip(*rows, strict=True)]
    names = ("difference of cl", "difference of cm", "difference of cd_pressure")
    return {name: (columns[0][:, j], columns[1][:, j], columns[2][:, j]) for j, name in enumerate(names)}


def _fitted(latents: Latents, exact: Array, alpha: Array) -> Asked:
    asked = Polar(linear_range=(np.radians(-3.5), np.radians(7.5)), same_angle=np.radians(0.5))
    found = fits(latents, asked, 0.25, LEVEL)
    assert found is not None
    mine = [r for r, plan in enumerate(found.plans) if plan.polar.run and plan.polar.config == "a"]
    truth = np.stack([found.plans[r].estimate(alpha[p], exact[p]) for r in mine for p in [_of(found, r)]])
    naive = 1.96 * np.sqrt(found.spread.independent)
    return {
        name: (found.value[mine, q] - truth[:, q], found.U[mine, q], naive[mine, q])
        for q, name in enumerate(("slope", "zero-lift angle"))
    }


def _of(found: Fits, row: int) -> NDArray[np.int64]:
    return found.plans[row].polar.points


def _turned(tests: int) -> Array:
    """How far the flow of each point is turned (P,)."""
    return np.tile(np.repeat([0.0, TURN], len(ALPHAS)), tests)


def _two_runs(tests: int, taps: TapPlaces) -> Campaign:
    rect = Shape.RECTANGULAR
    sources = [
        source("port", "tap pressure", size(PORT), INDEPENDENT, INDEPENDENT),
        source("zero", "tap pressure", size(ZERO, rect), "by run", "by module"),
        source("gain", "tap pressure", size(GAIN, rect, Scale.READING), "by test", "by module"),
        source("place", "tap location", size(PLACE), "by test", INDEPENDENT),
        source("static", "static pressure", size(STATIC), "by test"),
        source("encoder", "angle", size(np.radians(ENCODER)), "by test"),
        source("setting", "angle", size(np.radians(SETTING)), INDEPENDENT),
        source("edge", "trailing-edge coefficient", size(0.0)),
    ]
    count = len(ALPHAS)
    runs = [f"{letter}{i}" for i in range(tests) for letter in "AB" for _ in range(count)]
    made = campaign(
        sources, taps=taps, alphas=list(ALPHAS) * (2 * tests), runs=runs, spacing=False, mach=0.2,
        pressures="relative to static", contour_points=801,
    )  # fmt: skip
    assert made.points is not None
    columns = {
        **made.points.columns,
        "config": tuple(run[0].lower() for run in runs),
        "test": tuple(run[1:] for run in runs),
    }
    return replace(made, points=replace(made.points, columns=columns))


def _exact(alpha: Array, turned: Array) -> Array:
    """Exact cl, cm, cd_pressure (P, 3) of the flow turned by so much, in the axes of alpha."""
    there = TWELVE.coefficients(alpha + turned)
    cl = there.cn * np.cos(alpha) - there.ct * np.sin(alpha)
    cd = there.cn * np.sin(alpha) + there.ct * np.cos(alpha)
    return np.column_stack([cl, there.cm, cd])


def _misread(ideal: Campaign, taps: TapPlaces, rng: np.random.Generator) -> Campaign:
    """What instruments with the declared errors would have read: the truth less each error."""
    points = ideal.points
    assert points is not None
    count, n = points.readings.shape
    tests, each = count // (2 * len(ALPHAS)), 2 * len(ALPHAS)
    q = points.readings[0, 0] / TWELVE.cp(taps.theta[:1], points.alpha[:1])[0, 0]
    modules = np.unique(ideal.taps.columns["module"], return_inverse=True)[1]
    flow = points.alpha + _turned(tests)
    grid = np.linspace(taps.theta.min() - 0.05, taps.theta.max() + 0.05, 4001)
    s = TWELVE.arc_length(grid)
    theta = np.interp(taps.s + rng.normal(0.0, PLACE, (tests, n)), s[::-1], grid[::-1])
    cp = np.concatenate([TWELVE.cp(theta[i], flow[i * each : (i + 1) * each]) for i in range(tests)])
    gain = np.repeat(rng.uniform(-GAIN, GAIN, (tests, 4))[:, modules], each, axis=0)
    zero = np.repeat(rng.uniform(-ZERO, ZERO, (2 * tests, 4))[:, modules], len(ALPHAS), axis=0)
    readings = q * cp * (1.0 - gain) - zero - rng.normal(0.0, PORT, (count, n))
    static = points.channels["p_static"] - np.repeat(rng.normal(0.0, STATIC, tests), each)
    alpha = points.alpha - np.radians(
        np.repeat(rng.normal(0.0, ENCODER, tests), each) + rng.normal(0.0, SETTING, count)
    )
    channels = {**points.channels, "p_static": static}
    return replace(ideal, points=replace(points, readings=readings, channels=channels, alpha=alpha))
