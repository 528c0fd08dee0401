"""A problem from a plain function."""

from __future__ import annotations

import doctest

import numpy as np
import pytest

from tapband.probability import functional
from tapband.probability.functional import Quantity, problem_of


def test_example_in_the_module_runs() -> None:
    assert doctest.testmod(functional).failed == 0


def test_derivatives_are_exact() -> None:
    p = problem_of(
        lambda a, b: (a**3 * np.sin(b), np.exp(a * b)),
        [Quantity("a", 1.3, 0.1), Quantity("b", 0.7, 0.2)],
        ("f", "g"),
    )
    a, b = 1.3, 0.7
    expected = [
        [3 * a**2 * np.sin(b) * 0.1, b * np.exp(a * b) * 0.1],
        [a**3 * np.cos(b) * 0.2, a * np.exp(a * b) * 0.2],
    ]
    for f in range(2):
        # A complex step forms no difference: rounding only.
        np.testing.assert_allclose(p.sensitivity[f][0, :, 0], expected[f], rtol=1e-14)


def test_points_and_shapes_of_evaluations() -> None:
    p = problem_of(
        lambda a, b: a * b, [Quantity("a", [1.0, 2.0, 3.0], 0.1), Quantity("b", 5.0, [0.1, 0.2, 0.3])]
    )
    np.testing.assert_array_equal(p.estimate[:, 0], [5.0, 10.0, 15.0])
    assert p.evaluate(slice(1, 3), {0: np.ones((1, 7, 1))}).shape == (2, 7, 1)
    np.testing.assert_allclose(p.evaluate(slice(1, 3), {0: np.ones((1, 1, 1))})[:, 0, 0], [10.5, 15.5])


def test_a_quantity_known_exactly_is_no_source() -> None:
    p = problem_of(lambda a, b: a * b, [Quantity("a", 1.0, 0.1), Quantity("b", 5.0)])
    assert [family.source for family in p.families] == ["a"]


def test_given_integrates_the_linear_families_out() -> None:
    p = problem_of(lambda a, b, c: (a + 2 * b) * c, [
        Quantity("a", 1.0, 0.1, linear=True), Quantity("b", 2.0, 0.2, linear=True), Quantity("c", 3.0, 0.5),
    ])  # fmt: skip
    xi = np.linspace(-1, 1, 5)[None, :, None]
    y, added = p.given(slice(0, 1), {2: xi}, (0, 1))
    c = 3.0 + 0.5 * xi
    np.testing.assert_allclose(y, 5.0 * c, rtol=1e-14)
    np.testing.assert_allclose(added[0], (0.1 * c) ** 2, rtol=1e-13)
    np.testing.assert_allclose(added[1], (0.4 * c) ** 2, rtol=1e-13)


def test_refused_values_are_nan_not_warnings() -> None:
    p = problem_of(lambda a: np.sqrt(a), [Quantity("a", 1.0, 1.0)])
    y = p.evaluate(slice(0, 1), {0: np.array([[[-2.0], [0.5]]])})
    assert np.isnan(y[0, 0, 0])
    assert y[0, 1, 0] == pytest.approx(np.sqrt(1.5))
