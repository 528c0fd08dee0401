"""Many sources screened: the idle ones may go, the needed ones and the curved ones stay."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from campaigns import TWELVE, campaign, size, source
from tapband.nouns.campaign import Campaign
from tapband.nouns.source import COMMON, INDEPENDENT, Source
from tapband.probability.functional import Quantity, problem_of
from tapband.probability.linearised import propagate
from tapband.questions.rank_screening import LOSS, MANY, screen_sources
from tapband.reduction import assemble


def of_sources(sources: Sequence[Source]) -> Campaign:
    edge = source("edge", "trailing-edge coefficient", size(0.0))
    return campaign([*sources, edge], taps=TWELVE.taps(9, "cosine", 0.95), alphas=(5.0,), spacing=False)


def crowded() -> list[Source]:
    """Three sources that matter among thirty that do not."""
    needed = [
        source("port", "tap pressure", size(10.0), COMMON, INDEPENDENT),
        source("static", "static pressure", size(10.0)),
        source("angle", "angle", size(np.radians(0.05))),
    ]
    return needed + [source(f"idle {i}", "tap pressure", size(0.01), COMMON, INDEPENDENT) for i in range(30)]


def test_idle_sources_may_be_left_out_and_needed_ones_may_not() -> None:
    sources = crowded()
    assert len(sources) > MANY
    problem = assemble(of_sources(sources)).problem
    linear = propagate(problem, 0.95)
    found = screen_sources(problem, linear, 0.95, 1)
    out = {name for name, leave in zip(found.sources, found.leave_out, strict=True) if leave}
    assert {one.name for one in sources[3:]} <= out
    assert not {"port", "static", "angle"} & out
    # What the intervals lose is what a reduction without those sources gives.
    left = propagate(assemble(of_sources([one for one in sources if one.name not in out])).problem, 0.95)
    loss = 1.0 - left.U[0] / linear.U[0]
    assert np.all(loss <= LOSS)
    first = found.place == min(found.place[found.leave_out])
    np.testing.assert_allclose(found.loss[:, first].ravel(), loss, atol=1e-9)


def test_a_source_that_acts_only_through_its_square_is_kept() -> None:
    quantities = [Quantity("curved", 0.0, 1.0), Quantity("plain", 0.0, 0.1), Quantity("idle", 0.0, 1e-4)]
    problem = problem_of(lambda a, b, c: a * a + b + c, quantities)
    found = screen_sources(problem, propagate(problem, 0.95), 0.95, 1)
    assert found.sources == ("curved", "plain", "idle")
    assert found.leave_out.tolist() == [False, False, True]
    assert found.place.tolist() == [1, 2, 3]
