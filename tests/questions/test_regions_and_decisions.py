"""Joint regions hold what they say, and decisions follow the guides."""

from __future__ import annotations

from dataclasses import replace
from typing import Literal

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.special import ndtr

import tapband
from campaigns import campaign, every_kind, size, source
from tapband.nouns.plan import Limit, Plan
from tapband.nouns.source import COMMON, INDEPENDENT, Shape, Source
from tapband.probability.plain import sample_tile
from tapband.questions.decide import answer, decisions, rule_of
from tapband.questions.latents import latents_of
from tapband.questions.regions import CUMULANTS, LINEARISED, SHAPES, Region, factor, regions
from tapband.reduction import Reduced, reduce_campaign

Array = NDArray[np.float64]
EDGE = source("edge", "trailing-edge coefficient", size(0.0))


def reduced(sources: list[Source], alphas: list[float], plan: Plan | None = None) -> Reduced:
    made = campaign([*sources, EDGE], alphas=alphas, spacing=False, trials="300")
    return reduce_campaign(replace(made, plan=plan or Plan()))


def share_held(one: Reduced, region: Region, draws: int = 20_000) -> float:
    """Share of joint draws of the whole chain that a region holds."""
    columns = [one.outputs.index(region.a), one.outputs.index(region.b)]
    tiles = [
        sample_tile(one.assembled.problem, [region.point], 99, tile)[0] for tile in range(draws // 10_000)
    ]
    away = np.concatenate(tiles)[:, columns] - np.array(region.centre)
    distance = np.sum(away * np.linalg.solve(region.covariance, away.T).T, axis=1)
    return float(np.mean(distance <= region.k**2))


def test_the_factor_of_two_outputs_is_2_448() -> None:
    """JCGM 102:2011, 6.5.2.2: k_p = √χ²_{0.95;2} = 2.448 (R, methods.md)."""
    whole = [np.eye(2)[None]]
    assert factor(whole, np.array([[np.inf]]), 0.95)[0] == pytest.approx(2.448, abs=5e-4)
    # With ν degrees of freedom on all of it, k² = 2 F_{0.95}(2, ν − …): larger, and falling towards it.
    few, many = (float(factor(whole, np.array([[nu]]), 0.95)[0]) for nu in (10.0, 1e6))
    assert few > 2.6
    assert many == pytest.approx(2.448, abs=1e-3)


NORMAL = [
    source("port", "tap pressure", size(6.0), INDEPENDENT, INDEPENDENT),
    source("static", "static pressure", size(20.0), COMMON),
]
FLAT = [
    source("lift", "cl", size(0.01, Shape.RECTANGULAR), COMMON),
    source("drag", "cd_pressure", size(0.004, Shape.RECTANGULAR), COMMON),
    source("moment", "cm", size(0.002, Shape.RECTANGULAR), COMMON),
]


@pytest.mark.parametrize(
    ("sources", "method"), [(NORMAL, LINEARISED), (list(every_kind()), CUMULANTS), (FLAT, SHAPES)]
)
def test_joint_regions_hold_95_percent_of_20000_draws(sources: list[Source], method: str) -> None:
    one = reduced(sources, [4.0])
    found = regions(one, latents_of(one))
    assert [(region.a, region.b) for region in found] == [("cl", "cd_pressure"), ("cl", "cm")]
    for region in found:
        assert region.method == method
        # Three standard errors of a share of 20,000 are 0.5 %; the shapes' correction is good to as much.
        assert 0.94 <= share_held(one, region) <= 0.96


def test_a_region_has_the_axes_of_its_covariance() -> None:
    covariance = np.array([[4.0, 0.0], [0.0, 1.0]])
    upright = Region(
        point=0, a="cl", b="cm", centre=(0.0, 0.0), covariance=covariance, k=2.0, method=LINEARISED
    )
    assert upright.axes == pytest.approx((4.0, 2.0, 0.0))
    turned = replace(upright, covariance=np.array([[2.5, 1.5], [1.5, 2.5]]))
    assert turned.axes == pytest.approx((4.0, 2.0, 45.0))


@pytest.mark.parametrize(
    ("value", "guard", "said"),
    [
        (0.50, 0.1, "meets"), (0.15, 0.1, "meets"), (0.05, 0.1, "undecided"), (-0.05, 0.1, "undecided"),
        (-0.15, 0.1, "fails"), (1.05, 0.1, "undecided"), (1.15, 0.1, "fails"), (0.01, 0.0, "meets"),
        (-0.01, 0.0, "fails"),
    ],
)  # fmt: skip
def test_three_answers_with_a_guard_band(
    value: float, guard: float, said: Literal["meets", "fails", "undecided"]
) -> None:
    """Limits 0 to 1 (JCGM 106:2012, 8.2 and 8.3)."""
    assert answer(value, guard, 0.0, 1.0) == said


def test_rules_are_stated_in_words() -> None:
    assert rule_of(0.0) == "simple acceptance (JCGM 106, 8.2)"
    assert rule_of(1.0) == "guarded acceptance and rejection, w = 1 U (JCGM 106, 8.3)"


def test_probability_of_conformity_is_that_of_the_law() -> None:
    """A normal error of 0.004 in cl, an upper limit 0.004 above the value: Φ(1) = 0.8413."""
    scatter = [source("scatter", "cl", size(0.004), INDEPENDENT)]
    bare = reduced(scatter, [4.0])
    value = float(bare.linear.estimate[0, 3])
    plan = Plan(limits=(Limit(coefficient="cl", upper=value + 0.004),))
    one = reduced(scatter, [4.0], plan)
    (found,), said = decisions(one, latents_of(one))
    # Monte Carlo's mean and u come with the numerical error of 300 accelerated trials.
    assert found.probability == pytest.approx(float(ndtr(1.0)), abs=1e-3)
    assert found.answer == "undecided"
    assert said == []


def test_a_limit_reaches_points_within_what_counts_as_one_angle() -> None:
    plan = Plan(
        limits=(
            Limit(coefficient="cl", lower=-1.0, alpha_range=(np.radians(4.0), np.radians(4.0))),
            Limit(coefficient="cm", upper=0.0, points=("P3",)),
            Limit(coefficient="cm", upper=0.0, alpha_range=(np.radians(20.0), np.radians(30.0))),
            Limit(coefficient="cl_ref", upper=0.0),
        )
    )
    one = reduced(NORMAL, [0.0, 4.05, 8.0], plan)
    found, said = decisions(one, latents_of(one))
    assert [(d.point, d.coefficient) for d in found] == [(1, "cl"), (2, "cm")]
    assert said == [
        "limit[3] on cm: no point in its range; nothing was decided",
        "limit[4]: cl_ref is not computed here; nothing was decided",
    ]


@pytest.mark.parametrize("level", [0.005, 0.95, 0.9999])
def test_regions_are_finite_at_any_level_and_few_degrees_of_freedom(level: float) -> None:
    """A warning of NumPy (a root below zero) would fail the test too."""
    few = source("few", "static pressure", size(6.0, dof=2.0))
    drift = source("drift", "total pressure", size(9.0, Shape.RECTANGULAR))
    results = tapband.reduce(campaign((few, drift), level=level), trials=256)
    ratio = results.regions.select_dtypes("number").to_numpy()
    assert len(ratio) > 0
    assert np.isfinite(ratio).all()
