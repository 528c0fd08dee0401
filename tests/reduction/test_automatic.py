"""The sources that every campaign has, against sums written out here."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from campaigns import campaign, size, source
from tapband.experiment.chain import evaluate
from tapband.nouns.campaign import Closure, Reduction
from tapband.probability.linearised import propagate
from tapband.reduction import Assembled, assemble
from tapband.reduction.automatic import REAR_LOADING, RESERVED, RULE, SPACING, TRAILING_EDGE

ROOT3 = np.sqrt(3.0)


def _family(a: Assembled, name: str) -> int:
    return [one.family.source for one in a.loaded].index(name)


def test_spacing_is_the_rule_difference_and_a_third_of_each_half() -> None:
    c = campaign(alphas=(4.0,))
    a = assemble(c)
    found = a.problem.sensitivity[_family(a, SPACING)][0] * ROOT3
    estimate = a.problem.estimate[0]
    linear = assemble(replace(c, reduction=Reduction(integration="contour-linear"))).problem.estimate[0]
    np.testing.assert_allclose(found[:, 0], estimate - linear, atol=1e-13)
    order = a.sets[0].equation.quadrature.order
    for half in (0, 1):
        kept = sorted({*range(half, order.size, 2), 0, order.size - 1})
        excluded = np.ones(order.size, dtype=np.bool_)
        excluded[order[kept]] = False
        thin = assemble(replace(c, taps=replace(c.taps, excluded=excluded))).problem.estimate[0]
        np.testing.assert_allclose(found[:, 1 + half], (estimate - thin) / 3.0, atol=1e-13)


def test_edge_limits_follow_the_rear_taps() -> None:
    a = assemble(campaign(alphas=(8.0,)))
    rear_upper, rear_lower = a.cp[0, -1], a.cp[0, 0]
    half = 0.5 * (rear_upper - rear_lower)
    s, contour = a.s, a.contour
    upper = rear_upper + (rear_upper - a.cp[0, -2]) / (s[-1] - s[-2]) * (contour.s_upper - s[-1])
    lower = rear_lower + (rear_lower - a.cp[0, 1]) / (s[0] - s[1]) * (contour.s_lower - s[0])
    step = 0.5 * (upper + lower) - 0.5 * (rear_upper + rear_lower)
    common = a.loaded[_family(a, TRAILING_EDGE)].entries[0].load[0] * ROOT3
    loading = a.loaded[_family(a, REAR_LOADING)].entries[0].load[0] * ROOT3
    assert common == pytest.approx(max(abs(half), abs(step)), rel=1e-12)
    assert loading == pytest.approx(half, rel=1e-12)


def test_a_common_closing_value_acts_on_neither_lift_nor_moment() -> None:
    """On a sharp edge; what is left is the little projected height of the last pieces of the contour."""
    a = assemble(campaign(alphas=(8.0,)))
    common = a.problem.sensitivity[_family(a, TRAILING_EDGE)][0, :, 0]
    loading = a.problem.sensitivity[_family(a, REAR_LOADING)][0, :, 0]
    assert abs(common[3]) < 0.03 * abs(loading[3])
    assert abs(common[2]) < 0.03 * abs(loading[2])


def test_a_declared_edge_coefficient_replaces_both_terms_of_the_edge() -> None:
    declared = [source("base tap", "trailing-edge coefficient", size(0.01))]
    names = [one.family.source for one in assemble(campaign(declared)).loaded]
    assert names == ["base tap", SPACING]
    stated = assemble(campaign(trailing_edge=Closure(cp=0.1, standard=0.03)))
    assert [one.family.source for one in stated.loaded] == [SPACING, TRAILING_EDGE]
    assert stated.loaded[1].standard[0] == pytest.approx(0.03, rel=1e-15)


def test_automatic_sources_bear_their_reserved_names_and_are_shared_by_points_with_the_same_taps() -> None:
    a = assemble(campaign(compressibility="laitone", lost={(1, 7): True}))
    families = {one.family.source: one.family for one in a.loaded}
    assert set(families) == set(RESERVED) - {"scatter of samples"}
    first, second, third = families[SPACING].point_group
    assert first == third != second
    assert len(set(families[RULE].point_group)) == 1
    assert all(family.systematic for family in families.values())


@pytest.mark.parametrize(
    ("rule", "other"),
    [("prandtl-glauert", "karman-tsien"), ("laitone", "karman-tsien"), ("karman-tsien", "prandtl-glauert")],
)
def test_the_choice_of_the_rule_is_bounded_by_another_rule(rule: str, other: str) -> None:
    a, b = (assemble(campaign(compressibility=r, reference_mach=0.1)) for r in (rule, other))
    found = a.problem.sensitivity[_family(a, RULE)][:, :, 0] * ROOT3
    np.testing.assert_allclose(
        found[:, 5:], a.problem.estimate[:, 5:] - b.problem.estimate[:, 5:], atol=1e-13
    )
    assert np.all(found[:, :5] == 0.0)


def test_without_spacing_there_is_no_spacing_term() -> None:
    names = [one.family.source for one in assemble(campaign(spacing=False)).loaded]
    assert SPACING not in names


def test_a_lost_tap_widens_the_interval() -> None:
    whole = propagate(assemble(campaign(alphas=(6.0,))).problem, 0.95)
    nose = 20
    lost = propagate(assemble(campaign(alphas=(6.0,), lost={(0, nose + 2): True})).problem, 0.95)
    assert lost.u[0, 3] > whole.u[0, 3]


def test_prandtl_glauert_scales_every_coefficient_alike() -> None:
    a = assemble(campaign(compressibility="prandtl-glauert", mach=0.5, reference_mach=0.3))
    factor = np.sqrt(1.0 - 0.25) / np.sqrt(1.0 - 0.09)
    np.testing.assert_allclose(
        a.problem.estimate[:, 5:], factor * a.problem.estimate[:, :5], rtol=1e-9, atol=1e-14
    )


def test_a_refused_rule_empties_the_reference_columns_and_says_so() -> None:
    """Cp₀ near −6 at Mach 0.6 lies past vacuum; the other points go on."""
    a = assemble(campaign(alphas=(2.0, 16.0), compressibility="karman-tsien", mach=0.6))
    assert np.isfinite(a.problem.estimate[0]).all()
    assert np.isfinite(a.problem.estimate[1, :5]).all()
    assert np.isnan(a.problem.estimate[1, 5:]).all()
    said = [text for text in a.warnings if text.startswith("R1/P2: karman-tsien does not hold")]
    assert len(said) == 1
    linear = propagate(a.problem, 0.95)
    assert np.isfinite(linear.U[0]).all()
    assert np.isnan(linear.U[1, 5:]).all()


def test_chain_at_nominal_inputs_gives_the_estimate() -> None:
    a = assemble(campaign(compressibility="karman-tsien"))
    equation, inputs = a.problem.inputs(1)
    np.testing.assert_array_equal(evaluate(equation, inputs)[0, 0], a.problem.estimate[1])
