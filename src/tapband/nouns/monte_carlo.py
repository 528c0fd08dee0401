"""What may be asked of the Monte Carlo draws, in a campaign file, on the command line and in Python alike."""

from __future__ import annotations

import re
from operator import index

from tapband.nouns.errors import Fault

FEWEST_TRIALS = 100
"""Fewer do not place the ends of a 95 % interval: 2.5 % of 100 trials are 2 or 3."""
MOST_TRIALS = 10**9
MOST_SEED = 2**63 - 1
_FORM = re.compile(r"(plain:)?([0-9]{1,300})")


def trials_fault(asked: object, where: str) -> Fault | None:
    """What is wrong with a number of trials: "auto", a whole number or "plain:N"; None where nothing is."""
    rule = f'must be "auto", a whole number from {FEWEST_TRIALS}, or "plain:N"'
    text = trials_text(asked)
    match = _FORM.fullmatch(text)
    if text == "auto":
        return None
    if match is None or int(match[2]) < FEWEST_TRIALS:
        return Fault(where=where, rule=rule, got=_shown(asked), do='write "auto"')
    if int(match[2]) > MOST_TRIALS:
        rule = f"must be at most {MOST_TRIALS} trials, with which an interval has five digits"
        return Fault(where=where, rule=rule, got=_shown(asked), do='write "auto"')
    return None


def trials_text(asked: object) -> str:
    """Trials as a campaign holds them: text without blanks; empty where it is neither text nor a number."""
    if isinstance(asked, str):
        return asked.replace(" ", "")
    number = _whole(asked)
    return "" if number is None else str(number)


def seed_fault(asked: object, where: str) -> Fault | None:
    """What is wrong with a seed, None where nothing is."""
    number = _whole(asked)
    if number is not None and 0 <= number <= MOST_SEED:
        return None
    rule = f"must be a whole number from 0 to {MOST_SEED}"
    return Fault(where=where, rule=rule, got=_shown(asked), do="write one such as 7")


def _whole(value: object) -> int | None:
    """A whole number of any type, None where it is none; true and false are none."""
    if isinstance(value, bool):
        return None
    try:
        return index(value)  # type: ignore[arg-type]  # whatever is no whole number raises
    except TypeError:
        return None


def _shown(value: object) -> str:
    text = str(value)
    text = text if len(text) <= 60 else text[:57] + "..."
    return f'"{text}"' if isinstance(value, str) else text
