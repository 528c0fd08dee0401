"""Every misuse of a question between points gets one clear message, tested whole."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from functools import cache

import pytest

from campaigns import campaign, size, source
from tapband.face import Results, reduce
from tapband.face import compare as compare_campaign
from tapband.nouns.campaign import Campaign
from tapband.nouns.errors import QuestionError
from tapband.nouns.source import INDEPENDENT

POINTS = [
    ("R1", "P1", "clean", -2.0), ("R1", "P2", "clean", 2.0), ("R1", "P3", "clean", 6.0),
    ("R2", "P1", "trip", 2.0), ("R2", "P4", "clean", 2.0), ("R3", "P5", "trip", 10.0),
    ("R4", "P6", "flap", 2.0), ("R4", "P7", "trip", 6.0), ("P6", "P8", "clean", 4.0), ("P7", "P9", "clean", 4.0),
]  # fmt: skip
"""Run, point, config and angle; the last runs bear the names of points."""


def made() -> Campaign:
    ideal = campaign([source("scatter", "cl", size(0.004), INDEPENDENT)], alphas=[p[3] for p in POINTS])
    assert ideal.points is not None
    runs, names, configs = (tuple(p[i] for p in POINTS) for i in range(3))
    columns = {"point": names, "run": runs, "config": configs}
    return replace(ideal, points=replace(ideal.points, names=names, runs=runs, columns=columns))


@cache
def results() -> Results:
    return reduce(made(), trials="300")


MISUSES: list[tuple[Callable[[], object], str]] = [
    (
        lambda: results().compare("R1/P1", "R2"),
        'compare: both sides must be points, or runs, or configs; got "R1/P1" is a point, "R2" a run; '
        "write two of one kind",
    ),
    (
        lambda: results().compare("R1", "R1"),
        'compare: the two sides must differ; got "R1" and "R1", which are the same; write another',
    ),
    (
        lambda: results().compare("R1", "R9"),
        'compare: each side must be a point, a run or a config of the campaign; got "R9"; try R4, R3, R2',
    ),
    (
        lambda: results().compare("P1", "P2"),
        'point "P1": must name one point; got 2; write one of R1/P1, R2/P1',
    ),
    (
        lambda: results().compare("P6", "P7"),
        'compare: the names must say one thing; got "P6" and "P7", which are points and runs; '
        "write point:P6 or run:P6",
    ),
    (
        lambda: results().compare("R1", "other/campaign.toml"),
        "compare: both sides must be names of one campaign, so of one contour and one set of sources; "
        'got the file "other/campaign.toml"; put the readings of both into one campaign, with a run or config '
        "column",
    ),
    (
        lambda: results().compare("R1", results()),  # type: ignore[arg-type]
        "compare: both sides must be names of one campaign, so of one contour and one set of sources; "
        "got Results; put the readings of both into one campaign, with a run or config column",
    ),
    (
        lambda: results().compare("R1", "R3"),
        "compare: the two sides must reach common angles; got none within 0.1 deg, nor between angles of "
        '"R3"; widen the tolerance, or compare points',
    ),
    (
        lambda: results().compare("R1", "R4"),
        "compare: two runs must hold one config each, or some in common; "
        'got "R1" with clean and "R4" with flap, trip; compare configs',
    ),
    (
        lambda: results().compare("R1", "R2", "0.1"),
        'within: needs a unit; got "0.1"; write the unit that is meant, as in "0.1 deg" or "0.1 rad"',
    ),
    (lambda: results().compare("R1", "R2", "3 Pa"), 'within: must be an angle; got "3 Pa"; write "3 deg"'),
    (
        lambda: results().compare("R1", "R2", -1.0),
        'within: the tolerance of angles must be zero or more; got -1.0; write "0.1 deg"',
    ),
    (
        lambda: results().repeat("R1/P1"),
        "repeats: need two points or more; got 1; name every repeat of one angle",
    ),
    (
        lambda: results().repeat("R1/P2", "R2/P1"),
        "repeats: must be of one config; got clean, trip; compare configs instead",
    ),
    (
        lambda: results().repeat("R1/P1", "R1/P2"),
        "repeats: must be of one angle, within 0.1 deg; got -2.000 to 2.000 deg; "
        "name repeats of one angle, or widen same_angle",
    ),
    (
        lambda: results().fit("R1", ("-3 deg", "3 deg")),
        'fit: the linear range must hold 3 angles or more; got 2 of "R1" between -3 and 3 deg; widen it',
    ),
    (
        lambda: results().fit("R4"),
        'fit: a polar needs 3 angles or more; got 2 in "R4"; add points, or compare them',
    ),
    (
        lambda: results().fit("R1", ("6 deg", "-3 deg")),
        "fit: the linear range must run from the lower to the higher angle; got 6 to -3 deg; "
        "write the lower first",
    ),
    (
        lambda: results().fit("tripp"),
        'fit: must name a run or a config of the campaign; got "tripp"; try trip',
    ),
    (
        lambda: compare_campaign(replace(made(), points=None), "R1", "R2"),
        "compare: needs readings; got a campaign without them; add a table of points",
    ),
]


@pytest.mark.parametrize(("ask", "message"), MISUSES, ids=[str(i) for i in range(len(MISUSES))])
def test_a_misuse_gets_one_message_that_says_what_to_do(ask: Callable[[], object], message: str) -> None:
    with pytest.raises(QuestionError) as caught:
        ask()
    assert str(caught.value) == message


def test_a_name_that_is_a_point_and_a_run_may_say_which() -> None:
    """P6 is a point of R4 and a run; both kinds fit the pair only where the other side's name is both too."""
    assert set(results().compare("run:P6", "R1")["a"]) == {"P6/P8"}
    assert set(results().compare("P6", "P5")["a"]) == {"R4/P6"}
