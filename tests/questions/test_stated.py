"""At the stated condition: moved by the local slopes, with slope·u(alpha) and slope·u(M), apart by name."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from campaigns import TWELVE, campaign, every_kind, size, source
from tapband.nouns.campaign import Campaign
from tapband.nouns.source import COMMON, INDEPENDENT, Source
from tapband.probability.draws import block
from tapband.questions.latents import latents_at
from tapband.questions.stated import STATED, full_latents, stated, stated_problem
from tapband.reduction import assemble, reduce_campaign

Array = NDArray[np.float64]
CL, CD = 3, 4
EDGE = source("edge", "trailing-edge coefficient", size(0.0))
ANGLES = (1.97, 4.04, 6.01)
NOMINAL = (2.0, 4.0, 6.0)


def nominal(
    sources: Sequence[Source], alpha: Sequence[float] | None = NOMINAL, mach: Sequence[float] | None = None
) -> Campaign:
    made = campaign([*sources, EDGE], alphas=ANGLES, spacing=False, taps=TWELVE.taps(101, "cosine", 1.0))
    assert made.points is not None
    angle = None if alpha is None else np.radians(alpha)
    number = None if mach is None else np.array(mach)
    return replace(made, points=replace(made.points, nominal_alpha=angle, nominal_mach=number))


def test_exact_flow_is_moved_to_its_nominal_angle() -> None:
    assembled = assemble(nominal([]))
    problem = stated_problem(assembled, latents_at(assembled))
    assert problem is not None
    exact = TWELVE.coefficients(np.radians(NOMINAL))
    # 101 taps give cl to 1e-4; a parabola's slope over 2 deg steps errs by less than 0.1 % of 0.04 deg.
    np.testing.assert_allclose(problem.estimate[:, CL], exact.cl, atol=2e-4)
    assert np.all(np.abs(latents_at(assembled).estimate[:2, CL] - exact.cl[:2]) > 2e-3)


def test_an_angle_error_adds_slope_times_u_alpha() -> None:
    """0.05 deg moves the stated cl by its slope and, at fixed pressures, by −cd_pressure, together."""
    assembled = assemble(nominal([source("angle", "angle", size(np.radians(0.05)), COMMON)]))
    latents = latents_at(assembled)
    problem = stated_problem(assembled, latents)
    assert problem is not None
    slope = problem.slopes.alpha[:, CL]
    own = problem.sensitivity[0][:, CL, 0]
    expected = np.radians(0.05) * (slope + latents.estimate[:, CD])
    np.testing.assert_allclose(np.abs(own), expected, rtol=1e-9)
    # The slope is that of exact flow: 2 G/c with G ∝ sin(alpha + β), about 2π per rad and a tenth more.
    true = np.gradient(TWELVE.coefficients(np.radians(NOMINAL)).cl, np.radians(NOMINAL))
    np.testing.assert_allclose(slope[1], true[1], rtol=2e-3)


def test_a_mach_error_adds_slope_times_u_mach() -> None:
    """Where M is read by itself and nothing else hangs on it: |∂cl/∂M| 0.002, Prandtl-Glauert C M/(1 − M²)."""
    made = campaign(
        [source("mach", "mach", size(0.002), COMMON), EDGE], alphas=ANGLES, spacing=False,
        stream="dynamic and mach", pressures="relative to static",
    )  # fmt: skip
    assert made.points is not None
    made = replace(made, points=replace(made.points, nominal_mach=np.full(3, 0.31)))
    assembled = assemble(made)
    latents = latents_at(assembled)
    problem = stated_problem(assembled, latents)
    assert problem is not None
    m = latents.mach
    slope = latents.estimate[:, CL] * m / (1.0 - m * m)
    np.testing.assert_allclose(np.abs(problem.sensitivity[0][:, CL, 0]), 0.002 * slope, rtol=1e-9)
    np.testing.assert_allclose(
        problem.estimate[:, CL], latents.estimate[:, CL] + slope * (0.31 - m), rtol=1e-12
    )
    # Half the slope either way as limits, over a step of 0.01 in M.
    doubt = problem.sensitivity[-1][:, CL, CL]
    np.testing.assert_allclose(doubt, 0.5 * slope * np.abs(0.31 - m) / np.sqrt(3.0), rtol=1e-9)


def test_without_a_nominal_condition_there_is_no_stated_set() -> None:
    assembled = assemble(nominal([], alpha=None))
    assert stated_problem(assembled, latents_at(assembled)) is None
    assert full_latents(assembled).outputs == latents_at(assembled).outputs


def test_points_without_a_nominal_value_have_no_stated_coefficients() -> None:
    problem = stated_problem(a := assemble(nominal([], alpha=(2.0, np.nan, 6.0))), latents_at(a))
    assert problem is not None
    assert np.isnan(problem.estimate[1]).all()
    assert np.isfinite(problem.estimate[[0, 2]]).all()


def test_stated_names_stand_behind_all_others_and_covariances_hold_both() -> None:
    assembled = assemble(nominal(every_kind()))
    latents = full_latents(assembled)
    plain = latents_at(assembled)
    assert latents.outputs == (*plain.outputs, *STATED)
    covariance = latents.covariance(0, 1)
    np.testing.assert_allclose(covariance[:5, :5], plain.covariance(0, 1), rtol=1e-12, atol=1e-18)
    values = np.linalg.eigvalsh(latents.covariance(0, 0))
    assert values.min() > -1e-12 * values.max()


def test_the_derivatives_are_those_of_the_equation() -> None:
    """One latent at a time against small steps through the whole equation: cubic in the step, 1e-6 of it."""
    assembled = assemble(nominal(every_kind(), mach=(0.3, 0.31, 0.3)))
    problem = stated_problem(assembled, latents_at(assembled))
    assert problem is not None
    for f, columns in enumerate(problem.sensitivity):
        for g in range(0, columns.shape[2], 17):
            step = np.zeros((1, 2, columns.shape[2]))
            step[0, :, g] = 1e-3, -1e-3
            y = problem.evaluate(slice(0, 3), {f: step})
            slope = (y[:, 0] - y[:, 1]) / 2e-3
            # Differences of values near 1, good to 1e-16, over steps of 2e-3.
            np.testing.assert_allclose(slope, columns[:, :, g], rtol=1e-5, atol=1e-12)


def test_the_variances_of_linear_families_are_those_of_draws() -> None:
    assembled = assemble(nominal(every_kind()))
    problem = stated_problem(assembled, latents_at(assembled))
    assert problem is not None
    linear = [f for f, family in enumerate(problem.families) if family.linear]
    rest = [f for f in range(len(problem.families)) if f not in linear]
    drawn = block(problem.families, rest, range(3), 1, 0, 8)
    y, added = problem.given(slice(0, 3), drawn, linear)
    assert y.shape == (3, 8, 5)
    for f in linear:
        one = np.zeros((1, 1, len(problem.families[f].members)))
        at_zero = {g: xi[:, :1] for g, xi in drawn.items()}
        base = problem.evaluate(slice(0, 3), {**at_zero, f: one})
        total = np.zeros((3, 1, 5))
        for g in range(one.shape[2]):
            unit = one.copy()
            unit[0, 0, g] = 1.0
            total += (problem.evaluate(slice(0, 3), {**at_zero, f: unit}) - base) ** 2
        np.testing.assert_allclose(added[f][:, :1], total, rtol=1e-6, atol=1e-18)


def test_both_propagators_agree_at_the_stated_condition() -> None:
    normal = [
        source("port", "tap pressure", size(4.0), INDEPENDENT, INDEPENDENT),
        source("total", "total pressure", size(8.0), INDEPENDENT),
        source("angle", "angle", size(np.radians(0.03)), COMMON),
    ]
    reduced = reduce_campaign(nominal(normal))
    found = stated(reduced, latents_at(reduced.assembled))
    assert found is not None
    assert found.agrees.all()
    assert found.from_alpha[1, CL] == pytest.approx(
        found.problem.slopes.alpha[1, CL] * np.radians(0.03), rel=1e-9
    )
