"""Exact laws of linear combinations, against closed forms and against convolution."""

from __future__ import annotations

from math import sqrt

import numpy as np
import pytest
from scipy.special import ndtri, stdtrit

from tapband.nouns.problem import Family
from tapband.nouns.source import Shape
from tapband.probability.linear_law import LinearLaw, Term, linear_law
from tapband.probability.smoothing import TableBase

RECT, NORMAL = Shape.RECTANGULAR, Shape.NORMAL
Spec = tuple[Shape, list[float], float, float]


def law(*specs: Spec, tail: float = 7.5e-4) -> tuple[LinearLaw, float]:
    """One row: (shape, sensitivities, dof, reliability) of each family; and its u."""
    u = sqrt(sum(s * s for _, sizes, _, _ in specs for s in sizes))
    terms = []
    for shape, sizes, dof, reliability in specs:
        family = Family(
            source="s", members=("",) * len(sizes), point_group=("",), scale_group=("",), shape=shape,
            dof=np.array([dof]), reliability=reliability,
        )  # fmt: skip
        size = np.array([sizes]) / u
        terms.append(Term(family=family, size=size, dof=family.dof, doubt=np.array([reliability])))
    return linear_law(terms, np.array([True]), tail), u


def quantile(p: float, *specs: Spec) -> float:
    exact, u = law(*specs)
    return float(exact.quantile(p)[0]) * u


def of(shape: Shape, *sizes: float, dof: float = np.inf, reliability: float = 0.0) -> Spec:
    return shape, list(sizes), dof, reliability


CLOSED = {
    "one rectangle": ([of(RECT, 1.0)], 0.95 * sqrt(3)),
    "two rectangles, a triangle": ([of(RECT, 1.0, 1.0)], 2 * sqrt(3) * (1 - sqrt(0.05))),
    "two rectangles, a trapezoid": ([of(RECT, 2.0, 1.0)], 3 * sqrt(3) - sqrt(8 * 2 * 3 * 0.025)),
    "one triangle": ([of(Shape.TRIANGULAR, 1.0)], sqrt(6) * (1 - sqrt(0.05))),
    "one arcsine": ([of(Shape.ARCSINE, 1.0)], sqrt(2) * np.sin(np.pi * 0.475)),
    "JCGM 101, 9.2.3: four rectangles": ([of(RECT, 1.0, 1.0, 1.0, 1.0)], 2 * sqrt(3) * (2 - 0.6**0.25)),
    "normals": ([of(NORMAL, 3.0), of(NORMAL, 4.0)], 5 * float(ndtri(0.975))),
}


@pytest.mark.parametrize("case", CLOSED)
def test_quantiles_in_closed_form(case: str) -> None:
    specs, expected = CLOSED[case]
    # The damping of rows whose characteristic function dies slowly moves an end by less than 1e-6 u, or 2e-5 u
    # beside the edge of an arcsine, where the density grows without bound.
    assert quantile(0.975, *specs) == pytest.approx(expected, abs=2e-5 if "arcsine" in case else 1e-6)


def test_jcgm_101_unequal_rectangles() -> None:
    """JCGM 101:2008, 9.2.4: ±17.0 (17.016 recomputed)."""
    assert quantile(0.975, of(RECT, 1.0, 1.0, 1.0, 10.0)) == pytest.approx(17.016, abs=5e-4)  # printed digits


@pytest.mark.parametrize("nu", [1.0, 2.0, 3.0, 4.0, 5.5, 9.0, 30.0, 100.0, 1e4])
@pytest.mark.parametrize("p", [0.95, 0.975, 0.995])
def test_quantiles_of_student(nu: float, p: float) -> None:
    # 1e-9 of probability is left beyond the grid; 1e-7 of that times the spread of the worst density.
    assert quantile(p, of(NORMAL, 2.0, dof=nu)) == pytest.approx(2.0 * float(stdtrit(nu, p)), rel=2e-7)


def test_members_of_a_t_family_share_their_scale() -> None:
    """A 3-4 pair is one t of size 5, where two independent t's are something else."""
    assert quantile(0.975, of(NORMAL, 3.0, 4.0, dof=3.0)) == pytest.approx(
        5.0 * float(stdtrit(3.0, 0.975)), rel=1e-7
    )
    apart = quantile(0.975, of(NORMAL, 3.0, dof=3.0), of(NORMAL, 4.0, dof=3.0))
    assert abs(apart - 5.0 * float(stdtrit(3.0, 0.975))) > 0.2


def test_two_cauchy_errors_add_their_sizes() -> None:
    apart = quantile(0.975, of(NORMAL, 1.0, dof=1.0), of(NORMAL, 2.0, dof=1.0))
    assert apart == pytest.approx(3.0 * float(stdtrit(1.0, 0.975)), rel=1e-6)


def test_rectangle_of_doubtful_width_is_the_mean_over_the_doubt() -> None:
    """F(x) = mean over V of clip(½ + x/(2√3(1 + √3rV))), by a fine midpoint rule."""
    exact, _ = law(of(RECT, 1.0, reliability=0.25), of(NORMAL, 0.05))
    v = (np.arange(20_000) + 0.5) / 10_000 - 1.0
    scale, u = 1.0 + sqrt(3.0) * 0.25 * v, sqrt(1.0025)
    x = np.array([1.2])
    z = np.linspace(-6, 6, 241)
    weight = np.exp(-(z**2) / 2) / np.exp(-(z**2) / 2).sum()
    inside = (u * x - 0.05 * z[:, None]) / (2 * sqrt(3) * scale)
    mixed = (weight[:, None] * np.clip(0.5 + inside, 0, 1)).sum(axis=0).mean()
    assert exact.at(x)[0][0] == pytest.approx(mixed, abs=5e-5)  # twelve Gauss nodes across a kink


def test_many_small_terms_are_as_exact_as_single_ones() -> None:
    """Sixty rectangles: by four terms of log φ, and one by one (a member counted large is taken exactly)."""
    sizes = np.linspace(0.5, 1.5, 60)
    together, u = law(of(RECT, *sizes))
    x = np.array([1.9])
    angles = np.linspace(0.0, 40.0, 200_001)[1:]
    phi = np.prod([np.sinc(angles * s / u * sqrt(3.0) / np.pi) for s in sizes], axis=0)
    cdf = 0.5 + np.trapezoid(phi * np.sin(angles * x[0]) / angles, angles) / np.pi
    # The first interval of the trapezoid is missing: φ sin(ωx)/ω there is x.
    cdf += angles[0] * x[0] / np.pi
    assert together.at(x)[0][0] == pytest.approx(cdf, abs=1e-8)


def test_density_is_the_slope_and_the_law_is_symmetric() -> None:
    exact, _ = law(of(RECT, 1.0), of(NORMAL, 0.5, dof=6.0), of(Shape.ARCSINE, 0.4))
    x = np.array([0.8])
    (up, _), (down, _), (_, density), (left, _) = (exact.at(x + h) for h in (1e-5, -1e-5, 0.0, -1.6))
    assert density[0] == pytest.approx((up[0] - down[0]) / 2e-5, rel=1e-7)
    assert left[0] + exact.at(x)[0][0] == pytest.approx(1.0, abs=1e-12)


def test_table_agrees_with_the_law_it_holds() -> None:
    exact, _ = law(of(RECT, 1.0, 0.7), of(NORMAL, 0.8))
    x = np.linspace(-4.0, 4.0, 401)[None, None]
    cdf, density = TableBase(exact, (1, 1)).at(x)
    direct = np.array([exact.at(np.array([v])) for v in x.ravel()])[:, :, 0]
    # Cubic interpolation over 1/32 of a law whose fourth derivative is below 3: h⁴/384 · 3.
    np.testing.assert_allclose(cdf.ravel(), direct[:, 0], atol=1e-8)
    np.testing.assert_allclose(density.ravel(), direct[:, 1], atol=1e-6)


def test_a_row_does_not_depend_on_the_rows_beside_it() -> None:
    sizes = np.array([[1.0, 0.1], [0.4, 0.9], [0.2, 0.3]])
    sizes = sizes / np.sqrt((sizes**2).sum(axis=1, keepdims=True))

    def built(rows: list[int]) -> LinearLaw:
        family = Family(
            source="s",
            members=("", ""),
            point_group=("",),
            scale_group=("",),
            shape=RECT,
            dof=np.array([np.inf]),
        )
        many = np.full(len(rows), np.inf)
        term = Term(family=family, size=sizes[rows], dof=many, doubt=np.zeros(len(rows)))
        return linear_law([term], np.ones(len(rows), dtype=np.bool_), 1e-3)

    whole = built([0, 1, 2])
    for row in range(3):
        alone = built([row])
        assert alone.quantile(0.975)[0] == whole.quantile(0.975)[row]
        assert alone.at(np.array([0.7]))[0][0] == whole.at(np.full(3, 0.7))[0][row]
