"""Which points a name on one side of a comparison stands for: a point, a run or a config."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from difflib import get_close_matches
from typing import Literal

from tapband.nouns.errors import QuestionError
from tapband.questions.latents import Latents

Kind = Literal["point", "run", "config"]
KINDS: tuple[Kind, ...] = ("point", "run", "config")


@dataclass(frozen=True, slots=True, kw_only=True)
class Side:
    """One side of a comparison: what it names, as the user wrote it, and its points."""

    kind: Kind
    name: str
    points: tuple[int, ...]


def two_sides(latents: Latents, a: str, b: str) -> tuple[Side, Side]:
    """Both sides, of one kind. A name may say its kind: ``run:R1``, ``config:clean``, ``point:R1/P03``."""
    found_a, found_b = _candidates(latents, a), _candidates(latents, b)
    for name, found in ((a, found_a), (b, found_b)):
        if not found:
            raise QuestionError(_unknown(latents, name))
    both: list[Kind] = [kind for kind in KINDS if kind in found_a and kind in found_b]
    if not both:
        kinds = f'"{a}" is a {" or ".join(found_a)}, "{b}" a {" or ".join(found_b)}'
        raise QuestionError(
            f"compare: both sides must be points, or runs, or configs; got {kinds}; write two of one kind"
        )
    if len(both) > 1:
        raise QuestionError(
            f'compare: the names must say one thing; got "{a}" and "{b}", which are {"s and ".join(both)}s; '
            f"write {both[0]}:{_bare(a)} or {both[1]}:{_bare(a)}"
        )
    sides = (found_a[both[0]], found_b[both[0]])
    if sides[0].points == sides[1].points:
        raise QuestionError(
            f'compare: the two sides must differ; got "{a}" and "{b}", which are the same; write another'
        )
    return sides


def _candidates(latents: Latents, name: str) -> dict[Kind, Side]:
    """What a name may stand for."""
    if not isinstance(name, str):
        raise QuestionError(_not_a_name(name))
    stated, _, rest = name.partition(":")
    kinds: tuple[Kind, ...] = KINDS
    for kind in KINDS:
        if stated == kind and rest:
            kinds, name = (kind,), rest
    points: dict[Kind, Callable[[], tuple[int, ...]]] = {
        "point": lambda: _point(latents, name),
        "run": lambda: tuple(i for i, run in enumerate(latents.runs) if run and run == name),
        "config": lambda: tuple(i for i, config in enumerate(latents.configs) if config and config == name),
    }
    found = {kind: points[kind]() for kind in kinds}
    return {kind: Side(kind=kind, name=name, points=found[kind]) for kind in kinds if found[kind]}


def _point(latents: Latents, name: str) -> tuple[int, ...]:
    if name not in latents.keys and name not in latents.names:
        return ()
    if name not in latents.keys and (name in latents.runs or name in latents.configs):
        # An ambiguous point name that is also a run or config is meant as the latter.
        hits = [i for i, each in enumerate(latents.names) if each == name]
        return tuple(hits) if len(hits) == 1 else ()
    return (latents.index(name),)


def _bare(name: str) -> str:
    return name.partition(":")[2] if name.partition(":")[0] in KINDS else name


def _not_a_name(got: object) -> str:
    return (
        "compare: both sides must be names of one campaign, so of one contour and one set of sources; "
        f"got {type(got).__name__}; put the readings of both into one campaign, with a run or config column"
    )


def _unknown(latents: Latents, name: str) -> str:
    if name.endswith((".toml", ".csv", ".json", ".xlsx", ".parquet")):
        return (
            "compare: both sides must be names of one campaign, so of one contour and one set of sources; "
            f'got the file "{name}"; put the readings of both into one campaign, with a run or config column'
        )
    known = [*latents.keys, *dict.fromkeys((*latents.runs, *latents.configs))]
    near = get_close_matches(_bare(name), [k for k in known if k], n=3, cutoff=0.5)
    offered = near or [k for k in known if k][:6]
    return (
        "compare: each side must be a point, a run or a config of the campaign; "
        f'got "{name}"; try {", ".join(offered)}'
    )
