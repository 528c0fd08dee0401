"""Repeats are judged by the sources that change between them, never by the full uncertainty."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.special import chdtrc

from campaigns import campaign, every_kind, size, source
from tapband.nouns.source import COMMON, INDEPENDENT, Source
from tapband.questions.latents import Latents, latents_at
from tapband.questions.repeats import Repeats, repeats
from tapband.reduction import assemble

Array = NDArray[np.float64]
CL = 3
SAME = np.radians(0.1)
EDGE = source("edge", "trailing-edge coefficient", size(0.0))


def polar(sources: list[Source], alphas: list[float], runs: list[str], cl: list[float]) -> Latents:
    """Exact points whose cl is replaced."""
    latents = latents_at(assemble(campaign([*sources, EDGE], alphas=alphas, runs=runs, spacing=False)))
    estimate = latents.estimate.copy()
    estimate[:, CL] = cl
    return replace(latents, estimate=estimate)


def of_cl(latents: Latents) -> list[Repeats]:
    return [one for one in repeats(latents, SAME, 0.95) if one.coefficient == "cl"]


SCATTER = source("scatter", "cl", size(0.004), INDEPENDENT)
ZERO = source("zero", "cl", size(0.003), "by run")
SCALE = source("scale", "cl", size(0.1), COMMON)


def test_repeats_of_one_run_see_only_what_is_drawn_anew() -> None:
    """Three readings 0.500, 0.506, 0.503: s = 0.003 (by hand); predicted 0.004; χ² = 2·(3/4)² = 1.125."""
    (found,) = of_cl(polar([SCATTER, ZERO, SCALE], [4.0] * 3, ["R1"] * 3, [0.500, 0.506, 0.503]))
    assert found.sources == ("scatter",)
    assert found.scatter == pytest.approx(0.003, rel=1e-9)
    assert found.predicted == pytest.approx(0.004, rel=1e-9)
    assert found.chi2 == pytest.approx(1.125, rel=1e-9)
    assert found.p == pytest.approx(float(chdtrc(2, 1.125)), rel=1e-9)
    assert found.verdict == "as the sources that change predict"


def test_repeats_over_runs_see_what_runs_do_not_share() -> None:
    """Two runs of one: var of the contrast is 0.004² + 0.003², so predicted 0.005; s = 0.01/√2, χ² = 2."""
    (found,) = of_cl(polar([SCATTER, ZERO, SCALE], [4.0] * 2, ["R1", "R2"], [0.50, 0.51]))
    assert set(found.sources) == {"scatter", "zero"}
    assert found.predicted == pytest.approx(0.005, rel=1e-9)
    assert found.chi2 == pytest.approx(2.0, rel=1e-9)


def test_scatter_is_split_within_and_between_runs() -> None:
    """R1: 0.50, 0.52; R2: 0.60, 0.62. Within √(2·0.0002/2) = 0.01414, between means 0.51 and 0.61."""
    (found,) = of_cl(polar([SCATTER], [4.0] * 4, ["R1", "R1", "R2", "R2"], [0.50, 0.52, 0.60, 0.62]))
    assert found.within == pytest.approx(np.sqrt(0.0002), rel=1e-9)
    assert found.within_dof == 2
    assert found.between == pytest.approx(0.1 / np.sqrt(2.0), rel=1e-9)
    assert found.between_dof == 1
    assert found.verdict == "more scatter than the sources that change predict: one is missing or too small"


def test_a_shared_error_of_any_size_changes_no_verdict() -> None:
    cl, runs = [0.500, 0.506, 0.503], ["R1"] * 3
    with_it, without = (of_cl(polar(s, [4.0] * 3, runs, cl)) for s in ([SCATTER, SCALE], [SCATTER]))
    assert [(r.chi2, r.p, r.sources) for r in with_it] == [(r.chi2, r.p, r.sources) for r in without]


def test_scatter_that_no_source_predicts_names_a_missing_source() -> None:
    (found,) = of_cl(polar([SCALE], [4.0] * 2, ["R1"] * 2, [0.50, 0.51]))
    assert found.p == 0.0
    assert found.verdict == "they scatter, and no declared source changes between them: a source is missing"


def test_repeats_are_brought_to_one_angle_first() -> None:
    """Exact flow at 4.00 and 4.06 deg is no scatter: what is left is the curvature over 0.06 deg."""
    made = campaign([SCATTER, EDGE], alphas=[2.0, 4.0, 4.06, 6.0], spacing=False)
    (found,) = of_cl(latents_at(assemble(made)))
    assert found.moved
    assert found.scatter < 1e-4
    bare = campaign([SCATTER, EDGE], alphas=[4.0, 4.06], spacing=False)
    (alone,) = of_cl(latents_at(assemble(bare)))
    assert not alone.moved
    assert alone.scatter > 0.003


def test_configs_and_angles_are_not_mixed() -> None:
    latents = polar([SCATTER], [4.0, 4.0, 6.0, 6.0], ["R1"] * 4, [0.5, 0.5, 0.7, 0.7])
    latents = replace(latents, configs=("a", "b", "a", "a"))
    (found,) = of_cl(latents)
    assert (found.config, found.points) == ("a", (2, 3))


def test_verdicts_on_simulated_repeats_are_right_as_often_as_they_should() -> None:
    """300 angles of four repeats, errors as declared: p uniform, so about 5 % called too much.

    Eight standard errors of 5 % from 300 would be 10 %; the bound here is three, 1.2 % to 8.8 %.
    """
    rng = np.random.default_rng(9)
    latents = polar([SCATTER, ZERO, SCALE], [4.0] * 4, ["R1", "R1", "R2", "R2"], [0.0] * 4)
    too_much = 0
    for _ in range(300):
        zero = np.repeat(rng.normal(0.0, 0.003, 2), 2)
        estimate = latents.estimate.copy()
        estimate[:, CL] = 0.5 + rng.normal(0.0, 0.1) + zero + rng.normal(0.0, 0.004, 4)
        (found,) = of_cl(replace(latents, estimate=estimate))
        too_much += found.p < 0.05
    assert 0.012 * 300 <= too_much <= 0.088 * 300


def test_several_angles_are_also_judged_together_with_what_their_runs_share() -> None:
    """A zero shift of each run shows at every angle alike: together it counts once, not once an angle."""
    angles, runs = [0.0, 0.0, 4.0, 4.0], ["R1", "R2"] * 2
    latents = polar([SCATTER, ZERO], angles, runs, [0.0, 0.01, 0.4, 0.41])
    *single, together = of_cl(latents)
    assert len(single) == 2
    assert np.isnan(together.alpha)
    # V of the two contrasts (each (a − b)/√2): 0.004² + 0.003² on the diagonal, 0.003² off it; z = 0.01/√2.
    v = np.array([[25.0, 9.0], [9.0, 25.0]]) * 1e-6
    z = np.full(2, 0.01 / np.sqrt(2.0))
    assert together.chi2 == pytest.approx(float(z @ np.linalg.solve(v, z)), rel=1e-9)
    assert together.dof == 2
    assert together.chi2 < single[0].chi2 + single[1].chi2


def test_every_kind_of_source_gives_finite_verdicts() -> None:
    made = campaign(
        every_kind(), alphas=[0.0, 0.0, 4.0, 4.0, 8.0], runs=["R1", "R2", "R1", "R2", "R1"],
        noise=np.random.default_rng(2).normal(0.0, 4.0, (5, 41)),
    )  # fmt: skip
    found = repeats(latents_at(assemble(made)), SAME, 0.95)
    assert len(found) == 3 * 5
    assert all(np.isfinite(one.chi2) and 0.0 <= one.p <= 1.0 for one in found)
