"""Quantities of a polar: by hand on straight polars, and against simulated ones."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from campaigns import campaign, every_kind, size, source
from tapband.nouns.plan import Polar
from tapband.nouns.source import COMMON, INDEPENDENT, Source
from tapband.questions.between_trials import of_fits
from tapband.questions.fit import Fits, fits, readings
from tapband.questions.fit_notes import selection
from tapband.questions.fit_plan import QUANTITIES, derivatives
from tapband.questions.latents import Latents, latents_at
from tapband.reduction import assemble

Array = NDArray[np.float64]
DEGREE = np.pi / 180.0
CM, CL, CD = 2, 3, 4
WHOLE = Polar(linear_range=(-90.0 * DEGREE, 90.0 * DEGREE))


def straight(sources: list[Source], alphas: Array, runs: list[str] | None = None) -> Latents:
    """A polar with cl = 0.11 (alpha + 2), cm = −0.05 − 0.01 cl, cd_pressure = 0.01 + (alpha − 1)²/1000."""
    edge = source("edge", "trailing-edge coefficient", size(0.0))
    made = campaign([*sources, edge], alphas=alphas.tolist(), runs=runs, spacing=False)
    latents = latents_at(assemble(made))
    estimate = latents.estimate.copy()
    estimate[:, CL] = 0.11 * (alphas + 2.0)
    estimate[:, CM] = -0.05 - 0.01 * estimate[:, CL]
    estimate[:, CD] = 0.01 + (alphas - 1.0) ** 2 / 1000.0
    return replace(latents, estimate=estimate)


def fitted(latents: Latents, asked: Polar = WHOLE, centre: float = 0.25) -> Fits:
    found = fits(latents, asked, centre, 0.95)
    assert found is not None
    return found


def at(found: Fits, name: str, row: int = 0) -> tuple[float, float]:
    q = QUANTITIES.index(name)
    return float(found.value[row, q]), float(found.u[row, q])


ANGLES = np.arange(-4.0, 9.0, 2.0)


def test_a_straight_polar_gives_its_own_numbers() -> None:
    found = fitted(straight([], ANGLES))
    # Rounding of sums of seven terms of order 1.
    assert at(found, "cl_slope")[0] == pytest.approx(0.11, abs=1e-14)
    assert at(found, "alpha_zero_lift")[0] == pytest.approx(-2.0, abs=1e-13)
    assert at(found, "cm_zero_lift")[0] == pytest.approx(-0.05, abs=1e-14)
    assert at(found, "aerodynamic_centre")[0] == pytest.approx(0.26, abs=1e-13)
    assert at(found, "cd_pressure_min")[0] == pytest.approx(0.01, abs=1e-13)
    assert at(found, "curvature")[0] == pytest.approx(0.0, abs=1e-14)


def test_scatter_of_lift_gives_the_uncertainty_of_least_squares() -> None:
    """u(slope) = σ/√Σ(x − x̄)² = 0.02/√112, the textbook formula; the zero-lift angle by hand at x̄ = 2:
    u² = (σ/b)² (1/7 + (α0 − x̄)²/112) with α0 = −2."""
    found = fitted(straight([source("scatter", "cl", size(0.02), INDEPENDENT)], ANGLES))
    assert at(found, "cl_slope")[1] == pytest.approx(0.02 / np.sqrt(112.0), rel=1e-12)
    expected = 0.02 / 0.11 * np.sqrt(1.0 / 7.0 + 16.0 / 112.0)
    assert at(found, "alpha_zero_lift")[1] == pytest.approx(expected, rel=1e-12)


def test_a_shared_angle_error_shifts_the_zero_lift_angle_and_nothing_else_of_the_line() -> None:
    latents = straight([source("encoder", "angle", size(0.05 * DEGREE), COMMON)], ANGLES)
    # Of cl itself the angle moves nothing here, so that the abscissa alone is seen.
    latents = replace(latents, sensitivity=tuple(np.zeros_like(s) for s in latents.sensitivity))
    found = fitted(latents)
    assert at(found, "alpha_zero_lift")[1] == pytest.approx(0.05, rel=1e-12)
    assert at(found, "cl_slope")[1] == pytest.approx(0.0, abs=1e-15)
    assert at(found, "cm_zero_lift")[1] == pytest.approx(0.0, abs=1e-15)


def test_a_random_angle_error_acts_as_effective_variance() -> None:
    """0.05 deg in every angle is as 0.11·0.05 in every lift (Orear 1982, from memory)."""
    latents = straight([source("setting", "angle", size(0.05 * DEGREE), INDEPENDENT)], ANGLES)
    latents = replace(latents, sensitivity=tuple(np.zeros_like(s) for s in latents.sensitivity))
    found = fitted(latents)
    assert at(found, "cl_slope")[1] == pytest.approx(0.11 * 0.05 / np.sqrt(112.0), rel=1e-12)
    expected = 0.05 * np.sqrt(1.0 / 7.0 + 16.0 / 112.0)
    assert at(found, "alpha_zero_lift")[1] == pytest.approx(expected, rel=1e-12)


def test_a_shared_scale_error_of_lift_is_that_of_the_slope_and_leaves_zero_lift_alone() -> None:
    latents = straight([source("gain", "cl", size(1.0), COMMON)], ANGLES)
    scale = np.zeros_like(latents.sensitivity[0])
    scale[:, CL, 0] = 0.02 * latents.estimate[:, CL]
    found = fitted(replace(latents, sensitivity=(scale, *latents.sensitivity[1:])))
    assert at(found, "cl_slope")[1] == pytest.approx(0.02 * 0.11, rel=1e-12)
    assert at(found, "alpha_zero_lift")[1] == pytest.approx(0.0, abs=1e-13)


def test_the_moment_centre_moves_cm_and_the_aerodynamic_centre_stays_in_the_section() -> None:
    """On exact flow: an error of the moment centre shifts zero-lift moment hardly, the centre itself not."""
    lever = source("lever", "moment centre", size(0.001), COMMON)
    edge = source("edge", "trailing-edge coefficient", size(0.0))
    latents = latents_at(assemble(campaign([lever, edge], alphas=ANGLES.tolist(), spacing=False)))
    found = fitted(latents)
    # It would be the whole 0.001 if the centre's own place were forgotten; cn and cl differ by a cosine, so
    # 1 − ∂cn/∂cl is a few parts in a thousand.
    assert at(found, "aerodynamic_centre")[1] < 0.01 * 0.001


def test_lines_are_weighted_by_the_random_part_alone() -> None:
    """A shared error of any size changes no weight, so no estimate."""
    noise = np.random.default_rng(3).normal(0.0, 0.02, ANGLES.size)
    values = []
    for sources in ([], [source("gain", "cl", size(0.5), COMMON)]):
        latents = straight([source("scatter", "cl", size(0.02), INDEPENDENT), *sources], ANGLES)
        estimate = latents.estimate.copy()
        estimate[:, CL] += noise
        values.append(fitted(replace(latents, estimate=estimate)).value)
    np.testing.assert_array_equal(values[0], values[1])


def test_a_shared_q_error_does_not_bias_the_slope() -> None:
    """2,000 polars with 2 % of shared q and 0.02 of scatter, as Peelle's puzzle has it.

    Scatter is drawn in pairs of opposite sign, so that its linear part cancels and the bias alone is left.
    Weights that hold the shared term of measured values give about −0.45 % (R, methods.md).
    """
    polars, alphas = 2_000, np.linspace(-4.0, 8.0, 13)
    rng = np.random.default_rng(11)
    half = rng.normal(0.0, 0.02, (polars // 2, 13))
    scatter = np.concatenate([half, -half])
    scale = 1.0 + 0.02 * np.tile(rng.normal(0.0, 1.0, polars // 2), 2)
    latents, read = _many_polars(alphas, scale, scatter)
    slope = fits(latents, replace(WHOLE, same_angle=0.001), 0.25, 0.95)
    assert slope is not None
    ratio = slope.value[:, 0] / (0.11 * scale)
    # The scatter of the remaining second-order part over 1,000 pairs is below 0.01 %.
    assert abs(float(np.mean(ratio)) - 1.0) < 0.0005
    puzzled = _weighted_by_everything(alphas, read) / (0.11 * scale)
    assert -0.0055 < float(np.mean(puzzled)) - 1.0 < -0.0035


def _many_polars(alphas: Array, scale: Array, scatter: Array) -> tuple[Latents, Array]:
    """Latents of polars that share a q error within each; readings of cl (polars, n)."""
    count, n = scatter.shape
    read = 0.11 * (alphas + 2.0) * scale[:, None] + scatter
    runs = [f"R{i}" for i in range(count) for _ in range(n)]
    size_ = count * n
    estimate = np.zeros((size_, 5))
    estimate[:, CL] = read.ravel()
    estimate[:, CM] = -0.05
    estimate[:, CD] = np.tile((alphas - 1.0) ** 2 / 1000.0, count)
    shared, own = np.zeros((size_, 5, 1)), np.zeros((size_, 5, 1))
    shared[:, CL, 0], own[:, CL, 0] = 0.02 * read.ravel(), 0.02
    group = np.repeat(np.arange(count), n)
    latents = Latents(
        keys=tuple(f"P{i}" for i in range(size_)), names=tuple(f"P{i}" for i in range(size_)),
        outputs=("cn", "ct", "cm", "cl", "cd_pressure"), sources=("q", "scatter"), estimate=estimate,
        sensitivity=(shared, own), group=(group, np.arange(size_)), dof=np.full((2, size_), np.inf),
        runs=tuple(runs), configs=("",) * size_, alpha=np.tile(alphas, count) * DEGREE,
        mach=np.full(size_, 0.2), scale=(np.zeros(size_, dtype=np.int64),) * 2, on_alpha={}, on_mach={},
        on_centre={}, random=np.array([False, True]),
    )  # fmt: skip
    return latents, read


def _weighted_by_everything(alphas: Array, read: Array) -> Array:
    """Slopes of generalised least squares with V of scatter and of 2 % of the measured values (polars,)."""
    basis = np.stack([np.ones_like(alphas), alphas], axis=1)
    slopes = []
    for y in read:
        inverse = np.linalg.inv(0.02**2 * (np.eye(y.size) + np.outer(y, y)))
        slopes.append(np.linalg.solve(basis.T @ inverse @ basis, basis.T @ inverse @ y)[1])
    return np.array(slopes)


def test_derivatives_are_those_of_the_estimator() -> None:
    """By formula and by complex step through the whole estimator, to rounding."""
    rng = np.random.default_rng(8)
    latents = straight([source("scatter", "cl", size(0.02), INDEPENDENT)], np.arange(-4.0, 17.0, 1.7))
    estimate = latents.estimate.copy()
    estimate[:, CL] += rng.normal(0.0, 0.02, len(estimate))
    estimate[:, CL] -= np.maximum(np.degrees(latents.alpha) - 9.0, 0.0) ** 2 / 30.0
    plan = fitted(replace(latents, estimate=estimate), Polar(linear_range=(-0.1, 0.2))).plans[0]
    alpha, y = readings(replace(latents, estimate=estimate), plan)
    n = alpha.size
    angles = np.broadcast_to(alpha, (4, n, n)).astype(np.complex128)
    values = np.broadcast_to(y, (4, n, n, 3)).astype(np.complex128)
    for i in range(3):
        values[i, np.arange(n), np.arange(n), i] += 1e-30j
    angles[3, np.arange(n), np.arange(n)] += 1e-30j
    whole = plan.estimate(angles, values).imag / 1e-30
    by_y, by_alpha = derivatives(plan, alpha, y)
    assert not plan.highest.at_end
    np.testing.assert_allclose(by_y, np.moveaxis(whole[:3], 0, -1), rtol=1e-9, atol=1e-11)
    np.testing.assert_allclose(by_alpha, whole[3], rtol=1e-9, atol=1e-11)


def test_maximum_lift_of_a_parabola_is_its_vertex() -> None:
    latents = straight([source("scatter", "cl", size(0.01), INDEPENDENT)], np.arange(0.0, 17.0, 2.0))
    estimate = latents.estimate.copy()
    x = np.degrees(latents.alpha)
    estimate[:, CL] = 1.4 - 0.005 * (x - 11.3) ** 2
    found = fitted(replace(latents, estimate=estimate))
    assert at(found, "cl_max")[0] == pytest.approx(1.4, abs=1e-12)
    assert at(found, "alpha_cl_max")[0] == pytest.approx(11.3, abs=1e-10)
    note = found.notes[0][QUANTITIES.index("cl_max")]
    assert note.startswith("local parabola through 5 points; the highest lift read stands 0.00")
    assert "too far out on average, for being picked among 9" in note


def test_a_maximum_at_the_end_of_the_range_is_flagged_and_is_the_reading() -> None:
    found = fitted(straight([], ANGLES))
    assert at(found, "cl_max")[0] == 0.11 * 10.0
    assert found.notes[0][4] == (
        "END OF RANGE: the highest lift read is at 8.00 deg, an end of the polar; none was passed"
    )


def test_picking_the_larger_of_two_equal_readings_is_biased_by_sigma_over_root_pi() -> None:
    """E max of two standard normals is 1/√π (textbook); grid of 801 nodes to 1e-4."""
    assert selection(np.zeros(2), np.full(2, 0.01)) == pytest.approx(0.01 / np.sqrt(np.pi), rel=1e-3)
    assert selection(np.array([0.0, 1.0]), np.full(2, 0.01)) == pytest.approx(0.0, abs=1e-6)


def test_the_linear_range_is_found_before_the_stall_and_said() -> None:
    latents = straight([source("scatter", "cl", size(0.002), INDEPENDENT)], np.arange(-4.0, 17.0, 2.0))
    estimate = latents.estimate.copy()
    x = np.degrees(latents.alpha)
    estimate[:, CL] -= np.maximum(x - 8.0, 0.0) ** 2 / 60.0
    found = fitted(replace(latents, estimate=estimate), Polar())
    assert at(found, "cl_slope")[0] == pytest.approx(0.11, abs=1e-12)
    assert found.notes[0][0] == "linear range -4.00 to 8.00 deg, found"


def test_curvature_and_scatter_that_the_random_part_does_not_explain_are_said() -> None:
    """Seven points in steps of 2 deg: u of the quadratic term is σ/√Σ(x² − 16)² = 0.001/√1344 = 2.73e-5."""
    latents = straight([source("scatter", "cl", size(0.001), INDEPENDENT)], ANGLES)
    estimate = latents.estimate.copy()
    estimate[:, CL] += 0.001 * (ANGLES - 2.0) ** 2
    note = fitted(replace(latents, estimate=estimate)).notes[0][0]
    assert "the lift curves there: quadratic term 0.001 ± 5e-05 per deg²" in note
    assert "points scatter about the line by 0.01" in note


def test_a_range_that_holds_two_angles_gives_no_line_but_its_note() -> None:
    found = fitted(straight([], ANGLES), Polar(linear_range=(-4.1 * DEGREE, -1.9 * DEGREE)))
    assert np.all(np.isnan(found.value[0, :4]))
    assert found.notes[0][0] == "fewer than three angles in the linear range: no line"


def test_both_propagators_agree_on_every_fit_of_a_nearly_linear_polar() -> None:
    normal = [s for s in every_kind() if s.size.shape == every_kind()[0].size.shape and s.size.dof == np.inf]
    assembled = assemble(campaign(normal, alphas=ANGLES.tolist(), spacing=False))
    latents = latents_at(assembled)
    found = fitted(latents)
    drawn = of_fits(assembled.problem, latents, found, 0.95, 1)
    known = np.isfinite(found.value[0]) & (found.u[0] > 0.0)
    away = np.abs(drawn.high[0] - (found.value + found.U)[0])[known] / found.u[0][known]
    # Normal sources: only the curvature of the chain and of the quotients moves the ends.
    assert np.all(away < 0.05)


def test_runs_of_one_config_are_also_fitted_together() -> None:
    latents = straight([source("scatter", "cl", size(0.02), INDEPENDENT)], ANGLES, ["R1", "R2"] * 3 + ["R1"])
    latents = replace(latents, configs=("clean",) * 7)
    found = fitted(latents)
    assert [(plan.polar.run, plan.polar.config) for plan in found.plans] == [
        ("R1", "clean"), ("R2", "clean"), ("", "clean"),
    ]  # fmt: skip
    assert at(found, "cl_slope", 2)[1] == pytest.approx(0.02 / np.sqrt(112.0), rel=1e-12)
