"""Trials, seeds and campaigns that nobody can mean are refused alike in Python and on the command line."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest

import tapband
from bad_input_corpus import good
from campaigns import campaign
from tapband.cli import main
from tapband.nouns.errors import QuestionError, TapbandError

FEW = 'must be "auto", a whole number from 100, or "plain:N"; got {}; write "auto"'
MANY = 'must be at most 1000000000 trials, with which an interval has five digits; got {}; write "auto"'
SEED = "must be a whole number from 0 to 9223372036854775807; got {}; write one such as 7"
COMMANDS = (("reduce",), ("forecast",), ("size",), ("check",), ("rank", "--point", "R1/a1"))


@pytest.mark.parametrize("trials", [1, 99, "plain:1", "2", "many", 1e6, True, -5])
def test_few_trials_are_refused_in_python(trials: Any) -> None:
    for question in (tapband.reduce, tapband.forecast):
        with pytest.raises(TapbandError) as caught:
            question(campaign(), trials=trials)
        shown = f'"{trials}"' if isinstance(trials, str) else str(trials)
        assert str(caught.value) == "trials: " + FEW.format(shown)


def test_trials_beyond_any_patience_are_refused() -> None:
    with pytest.raises(TapbandError) as caught:
        tapband.reduce(campaign(), trials=10**9 + 1)
    assert str(caught.value) == "trials: " + MANY.format("1000000001")


@pytest.mark.parametrize(
    ("seed", "shown"), [(-1, "-1"), ("x", '"x"'), (2**63, str(2**63)), (1.5, "1.5"), (True, "True")]
)
def test_a_seed_that_is_none_is_refused_in_python(seed: Any, shown: str) -> None:
    with pytest.raises(TapbandError) as caught:
        tapband.reduce(campaign(), seed=seed)
    assert str(caught.value) == "seed: " + SEED.format(shown)


def test_numpy_integers_are_whole_numbers() -> None:
    results = tapband.reduce(campaign(), trials=np.int64(256), seed=np.int32(3))  # type: ignore[arg-type]
    assert (type(results.meta["seed"]), results.meta["seed"]) == (int, 3)


@pytest.mark.parametrize("command", COMMANDS, ids=lambda command: command[0])
def test_trials_and_seeds_are_refused_on_the_command_line(
    command: tuple[str, ...], tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    name, *more = command
    head = [name, str(good(tmp_path)), *more]
    for option, message in (
        ("--trials=1", "--trials: " + FEW.format('"1"')),
        ("--trials=plain:1", "--trials: " + FEW.format('"plain:1"')),
        ("--trials=2000000000", "--trials: " + MANY.format('"2000000000"')),
        ("--seed=-1", "--seed: " + SEED.format("-1")),
        ("--seed=x", "--seed: " + SEED.format('"x"')),
        ("--seed=99999999999999999999", "--seed: " + SEED.format("99999999999999999999")),
    ):
        assert main([*head, option]) == 2
        assert capsys.readouterr() == ("", message + "\n")


@pytest.mark.parametrize(("given", "kind"), [("campaign.toml", "str"), (None, "NoneType")])
def test_what_is_no_campaign_is_refused(given: Any, kind: str) -> None:
    with pytest.raises(QuestionError) as caught:
        tapband.reduce(given)
    do = 'write tapband.reduce(tapband.load("campaign.toml"), ...)'
    assert str(caught.value) == f"reduce: takes a campaign; got {kind}; {do}"


def test_what_is_no_path_is_refused() -> None:
    nothing: Any = None
    with pytest.raises(QuestionError) as caught:
        tapband.load(nothing)
    rule = "load: takes the path of a campaign file"
    assert str(caught.value) == f'{rule}; got NoneType; write tapband.load("campaign.toml")'
