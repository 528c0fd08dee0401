"""Simulated tests about sections whose flow is known exactly."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from itertools import product

import numpy as np
from numpy.typing import NDArray

from campaigns import TWELVE, campaign, size, source
from exact_sections import KarmanTrefftz, LayoutName, TapPlaces, section_of
from tapband.nouns.campaign import Campaign
from tapband.nouns.source import INDEPENDENT, Scale, Shape
from tapband.probability.linearised import propagate
from tapband.reduction import assemble

Array = NDArray[np.float64]
NAMES = ("cl", "cm", "cd_pressure")
COLUMNS = [3, 2, 4]
PORT, MODULE, GAIN, PLACE, ANGLE, STATIC = 4.0, 6.0, 0.001, 2e-4, 0.02, 8.0
"""Sizes as declared and as drawn: Pa, Pa (half-width), 1 (half-width), chords, degrees, Pa."""


def declared_errors(
    *, tests: int, taps: int, rearmost: float, automatic: bool, seed: int
) -> dict[str, float]:
    """Share of tests whose 95 % interval holds the exact coefficient, by coefficient.

    Every test is a run of its own, so that its shared errors are drawn afresh. Without the automatic terms
    the spacing term is off and the edge is declared to be known exactly.
    """
    rng = np.random.default_rng(seed)
    places = TWELVE.taps(taps, "cosine", rearmost)
    rect = Shape.RECTANGULAR
    sources = [
        source("port", "tap pressure", size(PORT), INDEPENDENT, INDEPENDENT),
        source("module", "tap pressure", size(MODULE, rect), "by run", "by module"),
        source("gain", "tap pressure", size(GAIN, rect, Scale.READING), "by run", "by module"),
        source("place", "tap location", size(PLACE), "by run", INDEPENDENT),
        source("static", "static pressure", size(STATIC), "by run"),
        source("angle", "angle", size(np.radians(ANGLE)), "by run"),
    ]
    if not automatic:
        sources.append(source("edge", "trailing-edge coefficient", size(0.0)))
    ideal = campaign(
        sources, taps=places, alphas=rng.uniform(-2.0, 9.0, tests).tolist(), runs=[f"R{i}" for i in range(tests)],
        pressures="relative to static", mach=0.2, contour_points=801, spacing=automatic,
    )  # fmt: skip
    seen = _misread(ideal, places, rng)
    linear = propagate(assemble(seen).problem, 0.95)
    assert ideal.points is not None
    truth = _truth(ideal.points.alpha, TWELVE)
    error = linear.estimate[:, COLUMNS] - truth
    return dict(zip(NAMES, np.mean(np.abs(error) <= linear.U[:, COLUMNS], axis=0).tolist(), strict=True))


def _truth(alpha: Array, section: KarmanTrefftz) -> Array:
    """Exact cl, cm, cd_pressure (P, 3)."""
    exact = section.coefficients(alpha)
    return np.column_stack([exact.cl, exact.cm, np.zeros_like(alpha)])


def _misread(ideal: Campaign, places: TapPlaces, rng: np.random.Generator) -> Campaign:
    """The campaign as instruments with the declared errors would have read it.

    A reading is what is true minus the error that the campaign's model adds to it.
    """
    points = ideal.points
    assert points is not None
    tests, n = points.readings.shape
    q = points.readings[0, 0] / TWELVE.cp(places.theta[:1], points.alpha[:1])[0, 0]
    modules = np.unique(ideal.taps.columns["module"], return_inverse=True)[1]
    grid = np.linspace(places.theta.min() - 0.05, places.theta.max() + 0.05, 4001)
    s = TWELVE.arc_length(grid)
    moved = places.s + rng.normal(0.0, PLACE, (tests, n))
    theta = np.interp(moved, s[::-1], grid[::-1])
    cp = np.stack([TWELVE.cp(theta[i], points.alpha[i]) for i in range(tests)]).reshape(tests, n)
    gain = rng.uniform(-GAIN, GAIN, (tests, 4))[:, modules]
    zero = rng.uniform(-MODULE, MODULE, (tests, 4))[:, modules]
    readings = q * cp * (1.0 - gain) - zero - rng.normal(0.0, PORT, (tests, n))
    channels = dict(points.channels)
    channels["p_static"] = channels["p_static"] - rng.normal(0.0, STATIC, tests)
    alpha = points.alpha - rng.normal(0.0, np.radians(ANGLE), tests)
    return replace(ideal, points=replace(points, readings=readings, channels=channels, alpha=alpha))


def automatic_alone(
    *, taps: Sequence[int], layout: LayoutName = "sqrt"
) -> tuple[dict[str, float], dict[str, float]]:
    """Share of exact flows that the automatic terms alone hold, and mean U over the rms error.

    For each number of taps at x = 0.97 t² (or cosine-spaced to 0.97): sections of 9 to 21 %, with and without
    camber, edge angle 10°, five angles of attack from −4 to 12°.
    """
    errors, expanded = [], []
    for count, thickness, camber in product(taps, (0.09, 0.12, 0.15, 0.18, 0.21), (0.0, 0.03)):
        section = section_of(thickness, camber, 10.0)
        places = section.taps(count, layout, 0.97)
        made = campaign(
            section=section, taps=places, alphas=[-4.0, 0.0, 4.0, 8.0, 12.0], mach=0.2,
            pressures="relative to static",
        )  # fmt: skip
        linear = propagate(assemble(made).problem, 0.95)
        assert made.points is not None
        errors.append(linear.estimate[:, COLUMNS] - _truth(made.points.alpha, section))
        expanded.append(linear.U[:, COLUMNS])
    error, u = np.concatenate(errors), np.concatenate(expanded)
    held = np.mean(np.abs(error) <= u, axis=0)
    ratio = np.mean(u, axis=0) / np.sqrt(np.mean(error**2, axis=0))
    return dict(zip(NAMES, held.tolist(), strict=True)), dict(zip(NAMES, ratio.tolist(), strict=True))
