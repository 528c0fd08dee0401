"""Sobol' indices: closed forms through both estimators, honest intervals, refusals counted."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from tapband.nouns.errors import QuestionError
from tapband.nouns.source import Shape
from tapband.probability.by_salib import screen, sobol_by_salib
from tapband.probability.functional import Equation, Quantity, equation, problem_of
from tapband.probability.sensitivity import Indices, sobol
from tapband.probability.unit_cube import Cube, quantile

Array = NDArray[np.float64]
RECT = Shape.RECTANGULAR

ISHIGAMI = ([0.313905, 0.442411, 0.0], [0.557589, 0.442411, 0.243684])
"""Ishigami function, a = 7, b = 0.1; closed form, recomputed."""
G_FUNCTION = [0.716192, 0.179048, 0.023676, 0.007162]
"""First-order indices of the g-function, a = 0, 1, 4.5, 9, 99 (×4); closed form, recomputed."""


def ishigami() -> Equation:
    inputs = [Quantity(f"x{i}", 0.0, np.pi / np.sqrt(3.0), RECT) for i in (1, 2, 3)]
    return problem_of(lambda x, y, z: np.sin(x) + 7.0 * np.sin(y) ** 2 + 0.1 * z**4 * np.sin(x), inputs)


def g_function() -> Equation:
    a = np.array([0.0, 1.0, 4.5, 9.0, 99.0, 99.0, 99.0, 99.0])
    inputs = [Quantity(f"x{i}", 0.5, 0.5 / np.sqrt(3.0), RECT) for i in range(a.size)]

    def value(*x: Array) -> Array:
        one = np.ones_like(np.real(x[0]))
        for weight, xi in zip(a, x, strict=True):
            one = one * (np.abs(4.0 * np.real(xi) - 2.0) + weight) / (1.0 + weight)
        return one

    return problem_of(value, inputs)


def names(problem: Equation) -> list[str]:
    return [family.source for family in problem.families]


def both(problem: Equation, samples: int, salib: int) -> list[Indices]:
    groups = names(problem)
    return [sobol(problem, groups, 1, samples=samples), sobol_by_salib(problem, 0, groups, salib, 1)]


def within(value: Array, half: Array, expected: Array, times: float = 1.5) -> bool:
    """Inside ``times`` the 95 % interval: 1.5 of them is 2.9 standard errors, for a handful of indices."""
    return bool(np.all(np.abs(value - expected) <= times * half + 1e-6))


def test_ishigami_function_gives_its_closed_form_by_both_estimators() -> None:
    for found in both(ishigami(), 2**13, 2**11):
        assert within(found.first[0, 0], found.first_ci[0, 0], np.array(ISHIGAMI[0])), found.method
        assert within(found.total[0, 0], found.total_ci[0, 0], np.array(ISHIGAMI[1])), found.method
        # An interval that holds everything would prove nothing.
        assert found.total_ci.max() < 0.12


def test_g_function_gives_its_closed_form_by_both_estimators() -> None:
    for found in both(g_function(), 2**13, 2**11):
        assert within(found.first[0, 0, :4], found.first_ci[0, 0, :4], np.array(G_FUNCTION)), found.method
        assert found.first_ci[0, 0, :4].max() < 0.12


def linear_problem() -> Equation:
    shapes = [Shape.NORMAL, RECT, Shape.TRIANGULAR, Shape.ARCSINE]
    inputs = [Quantity(f"x{i}", 1.0, 0.1 * (i + 1), shape) for i, shape in enumerate(shapes)]
    return problem_of(lambda a, b, c, d: 3.0 * a - b + 2.0 * c + 0.5 * d, inputs)


def test_linear_model_has_indices_equal_to_its_shares() -> None:
    variance = (np.array([3.0, -1.0, 2.0, 0.5]) * 0.1 * np.arange(1, 5)) ** 2
    share = variance / variance.sum()
    ours, theirs = both(linear_problem(), 64, 1024)
    # Nothing is left to sampling but rounding.
    np.testing.assert_allclose(ours.first[0, 0], share, atol=1e-12)
    np.testing.assert_allclose(ours.total[0, 0], share, atol=1e-12)
    assert within(theirs.first[0, 0], theirs.first_ci[0, 0], share)
    assert within(theirs.total[0, 0], theirs.total_ci[0, 0], share)


def product() -> Equation:
    return problem_of(lambda a, b: a * b, [Quantity("a", 1.0, 0.5), Quantity("b", 2.0, 0.5)])


def product_indices() -> tuple[Array, Array]:
    """Of a·b: variances b²σ², a²σ² and σ⁴ for the product alone."""
    own, joint = np.array([2.0**2 * 0.25, 1.0 * 0.25]), 0.25 * 0.25
    return own / (own.sum() + joint), (own + joint) / (own.sum() + joint)


def test_intervals_of_indices_hold_the_closed_form_of_a_product() -> None:
    first, total = product_indices()
    hits = []
    for seed in range(150):
        found = sobol(product(), ["a", "b"], seed, samples=64)
        hits += [np.abs(found.first - first) <= found.first_ci, np.abs(found.total - total) <= found.total_ci]
    # 600 partly dependent trials at a nominal 95 %; the smallest rate over many problems was 0.86 (t, ν = 5).
    assert 0.90 <= float(np.mean(hits)) <= 0.995


def test_groups_move_together() -> None:
    problem = problem_of(lambda a, b, c: a * b + c, [Quantity(n, 0.0, 1.0) for n in "abc"])
    found = sobol(problem, ["pair", "pair", "c"], 1, samples=1024)
    # a·b and c have variance 1 each; within the group the product is the group's own.
    np.testing.assert_allclose(found.first[0, 0], 0.5, atol=3.0 * found.first_ci.max())
    apart = sobol(problem, ["a", "b", "c"], 1, samples=1024)
    np.testing.assert_allclose(apart.first[0, 0, :2], 0.0, atol=1.5 * apart.first_ci.max())
    np.testing.assert_allclose(apart.total[0, 0, :2], 0.5, atol=1.5 * apart.total_ci.max())


def test_a_scale_in_doubt_belongs_to_its_source() -> None:
    """t with ν = 6 has variance 1.5 (JCGM 101:2008, 6.4.9.4); doubt r in limits adds r² = 0.25 of itself."""
    inputs = [
        Quantity("a", 0.0, 1.0, dof=6.0),
        Quantity("b", 0.0, 1.0, RECT, reliability=0.5),
        Quantity("c", 0.0, 1.0),
    ]
    problem = problem_of(lambda a, b, c: a + b + c, inputs)
    expected = np.array([1.5, 1.25, 1.0]) / 3.75
    ours, theirs = both(problem, 64, 2048)
    np.testing.assert_allclose(ours.total[0, 0], expected, atol=1e-12)
    assert within(theirs.total[0, 0], theirs.total_ci[0, 0], expected)


def test_without_a_variance_there_are_no_indices() -> None:
    """Student's t has no variance up to ν = 2 (JCGM 101:2008, 6.4.9.4, note)."""
    problem = problem_of(
        lambda a, b: (a + b, b), [Quantity("a", 0.0, 1.0, dof=2.0), Quantity("b", 0.0, 1.0)], ("y", "z")
    )
    found = sobol(problem, ["a", "b"], 1)
    assert np.isnan(found.total[0, 0]).all()
    np.testing.assert_allclose(found.total[0, 1], [0.0, 1.0], atol=1e-12)


def test_a_constant_has_no_indices() -> None:
    problem = problem_of(
        lambda a, b: (0.0 * a + 0.3, a + b), [Quantity("a", 1.0, 1.0), Quantity("b", 1.0, 1.0)], ("y", "z")
    )
    for found in both(problem, 64, 64):
        assert np.isnan(found.first[0, 0]).all()
        assert np.isfinite(found.first[0, 1]).all()


def refusing() -> Equation:
    """√(1 + a) refuses a < −1: 2.3 % of trials; the second output never refuses."""
    return problem_of(
        lambda a, b: (np.sqrt(1.0 + a) + b, a + b),
        [Quantity("a", 0.0, 0.5), Quantity("b", 0.0, 0.1)],
        ("y", "z"),
    )


def test_a_refused_evaluation_is_counted_and_refuses_the_indices_of_its_output() -> None:
    for found in both(refusing(), 256, 256):
        assert found.failed[0, 0] > 0
        assert found.failed[0, 1] == 0
        assert np.isnan([found.first[0, 0], found.total[0, 0], found.first_ci[0, 0]]).all()
        assert np.isfinite([found.first[0, 1], found.total[0, 1]]).all()


def test_salib_wants_a_power_of_two() -> None:
    message = "salib: needs a power of two from 2; got 100; write salib:1024"
    with pytest.raises(QuestionError) as caught:
        sobol_by_salib(product(), 0, ["a", "b"], 100, 1)
    assert str(caught.value) == message


def many_points() -> Equation:
    """Five points with shared and own errors, curved at the last."""
    centre = np.array([2.0, 1.5, 1.0, 0.5, 0.0])
    inputs = [
        Quantity("a", centre, 0.3, dof=8.0),
        Quantity("b", 1.0 + centre, 0.2, RECT, shared=False),
        Quantity("c", 0.0, 0.1, RECT, reliability=0.3),
    ]
    return problem_of(lambda a, b, c: (a * a + b * c, a * b), inputs, ("y", "z"))


def reordered(problem: Equation, order: list[int]) -> Equation:
    families = [
        replace(
            f,
            point_group=tuple(f.point_group[i] for i in order),
            scale_group=tuple(f.scale_group[i] for i in order),
            dof=f.dof[order],
        )
        for f in problem.families
    ]
    return equation(
        problem.function,
        problem.centre[order],
        families,
        [load[order] for load in problem.loading],
        problem.outputs,
    )


def test_rows_depend_on_neither_threads_nor_the_order_nor_the_company_of_points() -> None:
    problem, groups = many_points(), ["a", "b", "c"]
    whole = sobol(problem, groups, 7, threads=1)
    order = [3, 0, 4]
    for found, rows in (
        (sobol(problem, groups, 7, threads=4), [0, 1, 2, 3, 4]),
        (sobol(reordered(problem, order), groups, 7), order),
    ):
        for table in ("first", "first_ci", "total", "total_ci", "variance", "samples"):
            np.testing.assert_array_equal(getattr(found, table), getattr(whole, table)[rows])


def test_curved_points_get_more_samples_and_straight_ones_do_not() -> None:
    found = sobol(many_points(), ["a", "b", "c"], 7)
    assert found.samples[-1] > found.samples[0]


def test_screening_sees_what_the_linear_shares_do_not() -> None:
    problem = problem_of(lambda a, b, c: a * a + 0.01 * b + 0.0 * c, [Quantity(n, 0.0, 1.0) for n in "abc"])
    assert problem.sensitivity[0][0, 0, 0] == 0.0
    found = screen(problem, 0, 20, 1)
    a, b, c = found.mu_star[0]
    assert a > 10.0 * b > 0.0
    assert c == 0.0


@pytest.mark.parametrize("shape", list(Shape))
def test_quantiles_of_every_shape_have_mean_zero_and_variance_one(shape: Shape) -> None:
    """Midpoint sums over 10⁵ cells; the arcsine's ends converge with the root of the cell: 2e-3."""
    u = (np.arange(100_000) + 0.5) / 100_000
    values = quantile(shape, 0.4, u)
    assert abs(values.mean()) < 1e-9
    assert abs(values.var() - 1.0) < 2e-3
    assert np.all(np.diff(values) > 0.0)


def test_equal_coordinates_give_equal_latents() -> None:
    problem = many_points()
    cube = Cube.of(problem, 0)
    # Three latents, a χ² scale and a doubt of limits.
    assert cube.owner.tolist() == [0, 0, 1, 2, 2]
    u = np.full((2, 5), 0.5)
    np.testing.assert_array_equal(*cube.outputs(u))
    np.testing.assert_allclose(cube.outputs(u)[0], problem.estimate[0], rtol=1e-15)
