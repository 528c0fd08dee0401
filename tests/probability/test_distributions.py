"""Shapes of latents: draws, characteristic functions, Gauss rules, closed-form laws."""

from __future__ import annotations

from math import pi, sqrt

import numpy as np
import pytest
from scipy.special import ndtr, stdtr

from tapband.nouns.problem import Family
from tapband.nouns.source import Shape
from tapband.probability.distributions import (
    characteristic,
    doubt,
    effective_dof,
    fill,
    gauss_rule,
    half_width,
    log_coefficients,
    student,
    variance,
)
from tapband.probability.draws import fresh
from tapband.probability.smoothing import NormalBase, ShapeBase

BOUNDED = [s for s in Shape if s is not Shape.NORMAL]
SHAPES = [(s, 0.35) for s in Shape]


def family(shape: Shape = Shape.NORMAL, dof: float = np.inf, reliability: float = 0.0) -> Family:
    return Family(
        source="s", members=("",), point_group=("",), scale_group=("",), shape=shape,
        dof=np.array([dof]), reliability=reliability,
    )  # fmt: skip


@pytest.mark.parametrize(("shape", "top"), SHAPES)
def test_draws_have_mean_zero_unit_variance_and_the_fourth_moment_of_the_shape(
    shape: Shape, top: float
) -> None:
    x = fill(fresh(), shape, top, np.empty(400_000))
    nodes, weights = gauss_rule(shape, top)
    # Four standard errors of means of 4e5 values of order 1, 1 and 10.
    assert abs(x.mean()) < 4.0 / sqrt(4e5)
    assert abs((x**2).mean() - 1.0) < 4.0 * sqrt(2.0 / 4e5)
    assert abs((x**4).mean() - (weights * nodes**4).sum()) < 4.0 * 10.0 / sqrt(4e5)
    assert np.abs(x).max() <= half_width(shape, top)


def test_half_widths_are_those_of_the_guide() -> None:
    """JCGM 100:2008, 4.3.7-4.3.9: a/√3, a/√6, a/√2, a√((1+β²)/6)."""
    expected = {
        Shape.RECTANGULAR: 3.0,
        Shape.TRIANGULAR: 6.0,
        Shape.ARCSINE: 2.0,
        Shape.TRAPEZOIDAL: 6.0 / 1.25,
    }
    for shape, square in expected.items():
        assert half_width(shape, 0.5) == pytest.approx(sqrt(square), rel=1e-15)


@pytest.mark.parametrize(("shape", "top"), SHAPES)
@pytest.mark.parametrize("omega", [0.2, 1.0, 3.0])
def test_characteristic_function_is_the_mean_cosine(shape: Shape, top: float, omega: float) -> None:
    x = fill(fresh(), shape, top, np.empty(400_000))
    # Four standard errors of a mean of 4e5 cosines.
    assert characteristic(shape, top, np.array(omega)) == pytest.approx(
        np.cos(omega * x).mean(), abs=4.0 / sqrt(8e5)
    )


@pytest.mark.parametrize(("shape", "top"), SHAPES)
def test_log_coefficients_continue_the_characteristic_function(shape: Shape, top: float) -> None:
    omega = np.array([0.3, 0.5])
    c4, c6, c8 = log_coefficients(shape, top)
    series = -(omega**2) / 2 + c4 * omega**4 + c6 * omega**6 + c8 * omega**8
    # The next term is ω^10 times less than 0.01.
    np.testing.assert_allclose(np.log(characteristic(shape, top, omega)), series, atol=0.01 * 0.5**10)


def test_student_characteristic_function_in_closed_form() -> None:
    """ν = 1: exp(−|ω|); ν = 3: (1 + √3|ω|) exp(−√3|ω|); ν = 5: (1 + √5|ω| + 5ω²/3) exp(−√5|ω|)."""
    w = np.array([1e-6, 0.1, 1.0, 4.0])
    closed = {1.0: np.exp(-w), 3.0: (1 + sqrt(3) * w) * np.exp(-sqrt(3) * w)}
    closed[5.0] = (1 + sqrt(5) * w + 5 * w**2 / 3) * np.exp(-sqrt(5) * w)
    for nu, value in closed.items():
        np.testing.assert_allclose(student(np.array(nu), w), value, rtol=1e-12)


@pytest.mark.parametrize("nu", [78.0, 79.9, 80.1, 200.0, 1e4])
def test_student_characteristic_function_of_large_dof_by_its_scale_mixture(nu: float) -> None:
    """Against E exp(−ω²ν/(2χ²)) by Gauss-Laguerre quadrature over χ²; both sides of the change of method."""
    x, w = np.polynomial.legendre.leggauss(200)
    spread = np.sqrt(2.0 * nu)
    chi2 = nu + 10.0 * spread * x
    chi2, w = chi2[chi2 > 0], w[chi2 > 0]
    density = np.exp((0.5 * nu - 1.0) * np.log(chi2 / nu) - 0.5 * (chi2 - nu))
    for omega in (0.5, 2.0, 4.0):
        mixture = (w * density * np.exp(-(omega**2) * nu / (2.0 * chi2))).sum() / (w * density).sum()
        # Debye's expansion with three terms is good to 1e-8.
        assert student(np.array(nu), np.array(omega)) == pytest.approx(mixture, rel=1e-7)


@pytest.mark.parametrize(("shape", "top"), SHAPES)
def test_gauss_rule_is_exact_to_the_ninth_power(shape: Shape, top: float) -> None:
    nodes, weights = gauss_rule(shape, top)
    assert weights.sum() == pytest.approx(1.0, abs=1e-14)
    assert (weights * nodes**2).sum() == pytest.approx(1.0, rel=1e-12)
    # Eighth moment: from the fourth derivative-free series of the cumulants, κ4, κ6, κ8 = 24 c4, −720 c6, 40320 c8.
    c4, c6, c8 = log_coefficients(shape, top)
    k4, k6, k8 = 24.0 * c4, -720.0 * c6, 40320.0 * c8
    eighth = k8 + 28.0 * k6 + 35.0 * k4**2 + 210.0 * k4 + 105.0
    assert (weights * nodes**8).sum() == pytest.approx(eighth, rel=1e-9)


@pytest.mark.parametrize("shape", BOUNDED)
@pytest.mark.parametrize("top", [0.0, 0.4, 1.0])
def test_closed_form_law_is_that_of_the_draws(shape: Shape, top: float) -> None:
    x = np.sort(fill(fresh(), shape, top, np.empty(100_000)))
    cdf, density = ShapeBase(shape, top).at(x)
    # Kolmogorov's distance exceeds 1.95/√n once in a thousand samples.
    assert np.abs(cdf - (np.arange(x.size) + 0.5) / x.size).max() < 1.95 / sqrt(x.size)
    inside = np.linspace(-0.9, 0.9, 7) * half_width(shape, top) + 0.011
    upper, lower = (ShapeBase(shape, top).at(inside + h)[0] for h in (1e-6, -1e-6))
    np.testing.assert_allclose(ShapeBase(shape, top).at(inside)[1], (upper - lower) / 2e-6, rtol=1e-4)
    assert density.min() >= 0.0


def test_normal_law_is_the_normal_law() -> None:
    x = np.linspace(-6, 6, 9)
    cdf, density = NormalBase().at(x)
    np.testing.assert_array_equal(cdf, ndtr(x))
    np.testing.assert_allclose(density, np.exp(-(x**2) / 2) / sqrt(2 * pi), rtol=1e-14)


def test_doubt_and_degrees_of_freedom_say_the_same() -> None:
    """ν = ½ r⁻² (JCGM 100:2008, G.4.2, eq. G.3): 25 % is ν = 8, 50 % is ν = 2."""
    for r, nu in ((0.25, 8.0), (0.5, 2.0), (0.1, 50.0)):
        assert doubt(family(Shape.RECTANGULAR, dof=nu), 0) == pytest.approx(r, rel=1e-14)
        assert effective_dof(family(Shape.RECTANGULAR, reliability=r))[0] == pytest.approx(nu, rel=1e-14)
    assert doubt(family(), 0) == 0.0


def test_variances_of_scale_mixtures() -> None:
    """t: ν/(ν − 2), none for ν ≤ 2; doubted half-width: 1 + r²."""
    assert variance(family(dof=5.0))[0] == pytest.approx(5.0 / 3.0)
    assert np.isnan(variance(family(dof=2.0))[0])
    assert variance(family(Shape.ARCSINE, reliability=0.3))[0] == pytest.approx(1.09)
    assert variance(family())[0] == 1.0


def test_t_draws_follow_student() -> None:
    from tapband.probability.draws import block

    xi = block([family(dof=3.0)], [0], range(1), 5, 0, 100_000)[0].ravel()
    ordered = np.sort(xi)
    distance = np.abs(stdtr(3.0, ordered) - (np.arange(xi.size) + 0.5) / xi.size).max()
    assert distance < 1.95 / sqrt(xi.size)  # once in a thousand samples
