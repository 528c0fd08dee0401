"""Linearised propagation: the worked examples of the guides, and covariance by shared latents."""

from __future__ import annotations

from math import inf, sqrt

import numpy as np
import pytest
from scipy.special import ndtri, stdtrit

from tapband.nouns.problem import Family
from tapband.nouns.source import Shape
from tapband.probability.functional import Equation, Quantity, equation, problem_of
from tapband.probability.linearised import coverage_factor, cross_covariance, propagate

RECT = Shape.RECTANGULAR


def end_gauge() -> Equation:
    """JCGM 100:2008, H.1 [nm, K]."""
    return problem_of(
        lambda ls, d, da, a, th, dt: ls + d - ls * (da * th + a * dt),
        [
            Quantity("standard", 50_000_623.0, 25.0, dof=18.0),
            Quantity("difference", 215.0, 9.7, dof=25.6),
            Quantity("difference in expansion", 0.0, 1e-6 / sqrt(3), RECT, dof=50.0),
            Quantity("expansion", 11.5e-6, 2e-6 / sqrt(3), RECT),
            Quantity("temperature", -0.1, 0.41),
            Quantity("difference in temperature", 0.0, 0.05 / sqrt(3), RECT, dof=2.0),
        ],
    )


def mass() -> Equation:
    """JCGM 101:2008, 9.3 [mg, kg/m³]."""
    return problem_of(
        lambda m, d, ra, rw, rr: (m + d) * (1 + (ra - 1.2) * (1 / rw - 1 / rr)) - 100_000.0,
        [
            Quantity("reference mass", 100_000.0, 0.050),
            Quantity("added mass", 1.234, 0.020),
            Quantity("air", 1.20, 0.10 / sqrt(3), RECT),
            Quantity("weight", 8000.0, 1000.0 / sqrt(3), RECT),
            Quantity("reference", 8000.0, 50.0 / sqrt(3), RECT),
        ],
    )


def impedance() -> Equation:
    """JCGM 100:2008, H.2: means of five simultaneous readings, correlated through their errors."""
    readings = np.array(
        [
            [5.007, 4.994, 5.005, 4.990, 4.999],
            [19.663e-3, 19.639e-3, 19.640e-3, 19.685e-3, 19.678e-3],
            [1.0456, 1.0438, 1.0468, 1.0428, 1.0433],
        ]
    )
    load = np.linalg.cholesky(np.cov(readings) / 5)
    family = Family(
        source="readings", members=("1", "2", "3"), point_group=("",), scale_group=("",), dof=np.array([inf])
    )
    return equation(
        lambda v, i, phi: (v / i * np.cos(phi), v / i * np.sin(phi), v / i),
        readings.mean(axis=1)[None],
        [family],
        [load],
        outputs=("R", "X", "Z"),
    )


def test_end_gauge() -> None:
    r = propagate(end_gauge(), 0.99)
    assert r.estimate[0, 0] == pytest.approx(50_000_838.0, abs=0.5)  # printed digits
    assert r.u[0, 0] == pytest.approx(31.7, abs=0.05)
    # 16.75 and 91.9 recomputed without truncating ν to 16 or rounding u (JCGM 100 prints 16, 2.92 and 93); ν from
    # contributions rounded to 0.1 nm, which is worth 0.02.
    assert r.dof[0, 0] == pytest.approx(16.75, abs=0.02)
    assert r.k[0, 0] == pytest.approx(2.903, abs=0.0005)
    assert r.U[0, 0] == pytest.approx(91.9, abs=0.05)
    assert r.high[0, 0] - r.estimate[0, 0] == pytest.approx(r.U[0, 0], rel=1e-8)


def test_end_gauge_contributions() -> None:
    """JCGM 100:2008, H.1.7: 25, 9.7, 0 (expansion and temperature at first order), 2.9, 16.6 nm."""
    contribution = propagate(end_gauge(), 0.99).contribution[0, 0]
    np.testing.assert_allclose(contribution, [25.0, 9.7, 2.9, 0.0, 0.0, 16.6], atol=0.05)


def test_simultaneous_impedance() -> None:
    r = propagate(impedance(), 0.95)
    np.testing.assert_allclose(r.estimate[0], [127.732, 219.847, 254.260], atol=5e-4)  # printed digits
    # One unit of the last digit: the guide computes from rounded means and correlations.
    np.testing.assert_allclose(r.u[0], [0.071, 0.295, 0.236], atol=1e-3)
    correlation = r.covariance[0] / np.outer(r.u[0], r.u[0])
    np.testing.assert_allclose(correlation[[0, 0, 1], [1, 2, 2]], [-0.588, -0.485, 0.993], atol=1e-3)


def test_mass_calibration_linearised() -> None:
    """JCGM 101:2008, 9.3, from memory: u 0.0539, [1.1285, 1.3395]; recomputed."""
    r = propagate(mass(), 0.95)
    assert r.u[0, 0] == pytest.approx(0.0539, abs=5e-5)
    np.testing.assert_allclose([r.low[0, 0], r.high[0, 0]], [1.1285, 1.3395], atol=1e-4)


def test_coverage_factors() -> None:
    nu = np.array([1.0, 2.5, 16.75, 1e9, inf, np.nan])
    expected = [12.706, stdtrit(2.5, 0.975), stdtrit(16.75, 0.975), ndtri(0.975), ndtri(0.975), np.nan]
    # 12.706 and 1.960: JCGM 100:2008, table G.2.
    np.testing.assert_allclose(coverage_factor(nu, 0.95), expected, atol=5e-4)


def test_relative_doubt_counts_as_degrees_of_freedom() -> None:
    """25 % doubt in half-widths is ν = 8 (JCGM 100:2008, G.4.2); alone it is all there is."""
    r = propagate(problem_of(lambda a: a, [Quantity("a", 0.0, 1.0, RECT, reliability=0.25)]), 0.95)
    assert r.dof[0, 0] == pytest.approx(8.0, rel=1e-12)


def two_points() -> tuple[Equation, list[Family]]:
    """y = a + b at two points: ``a`` common, ``b`` each point's own; and a third that shares neither."""
    families = [
        Family(source="a", members=("",), point_group=("g", "g", "h"), scale_group=("",) * 3, dof=np.full(3, inf)),
        Family(
            source="b", members=("",), point_group=("0", "1", "2"), scale_group=("0", "1", "2"),
            dof=np.full(3, inf), systematic=False,
        ),
    ]  # fmt: skip
    centre = np.zeros((3, 2))
    loads = [np.array([[3.0], [0.0]]), np.array([[0.0], [4.0]])]
    return equation(
        lambda a, b: (a + b, a - b), centre, families, loads, outputs=("sum", "difference")
    ), families


def test_covariance_between_points_is_what_they_share() -> None:
    problem, families = two_points()
    shared = cross_covariance(families, problem.sensitivity, 0, 1)
    np.testing.assert_allclose(shared, [[9.0, 9.0], [9.0, 9.0]], atol=1e-12)
    np.testing.assert_array_equal(cross_covariance(families, problem.sensitivity, 0, 2), np.zeros((2, 2)))
    own = cross_covariance(families, problem.sensitivity, 1, 1)
    np.testing.assert_allclose(own, propagate(problem, 0.95).covariance[1], rtol=1e-14)
    np.testing.assert_allclose(own, [[25.0, -7.0], [-7.0, 25.0]], rtol=1e-14)


def test_covariance_of_pairs_and_of_a_dense_table() -> None:
    problem, families = two_points()
    i = np.arange(3)
    dense = cross_covariance(families, problem.sensitivity, i[:, None], i[None, :])
    assert dense.shape == (3, 3, 2, 2)
    pairs = cross_covariance(families, problem.sensitivity, [0, 2], [1, 2])
    np.testing.assert_array_equal(pairs, dense[[0, 2], [1, 2]])
    flat = dense.transpose(0, 2, 1, 3).reshape(6, 6)
    np.testing.assert_allclose(flat, flat.T, atol=1e-12)
    assert np.linalg.eigvalsh(flat).min() > -1e-12  # positive semi-definite to rounding


def test_systematic_and_random_parts() -> None:
    problem, _ = two_points()
    r = propagate(problem, 0.95)
    np.testing.assert_allclose([r.systematic[0, 0], r.random[0, 0], r.u[0, 0]], [3.0, 4.0, 5.0], rtol=1e-14)


def test_an_output_without_an_estimate_is_nan_and_alone_so() -> None:
    problem = problem_of(
        lambda a, b: (a + b, np.where(a < 0.5, np.nan, a * b)),
        [Quantity("a", [0.0, 1.0], 0.1), Quantity("b", [1.0, 1.0], 0.2)],
        outputs=("sum", "product"),
    )
    r = propagate(problem, 0.95)
    assert np.isnan(
        [r.u[0, 1], r.dof[0, 1], r.low[0, 1], r.contribution[0, 1, 0], r.covariance[0, 0, 1]]
    ).all()
    assert np.isfinite([r.u[0, 0], r.U[1, 1], r.covariance[0, 0, 0], r.covariance[1, 0, 1]]).all()


def test_no_error_no_uncertainty() -> None:
    r = propagate(problem_of(lambda a: 2.0 * a, [Quantity("a", 3.0)]), 0.95)
    assert (r.u[0, 0], r.U[0, 0], r.dof[0, 0], r.low[0, 0]) == (0.0, 0.0, inf, 6.0)


def test_results_are_read_only() -> None:
    with pytest.raises(ValueError, match="read-only"):
        propagate(mass(), 0.95).u[0, 0] = 1.0
