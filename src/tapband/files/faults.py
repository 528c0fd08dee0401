"""Gathers every fault and warning of one pass over an input, so that a user sees them all at once.

A reader of one value knows the rule but not the place: it raises :class:`RuleError`. Whoever knows the place
catches it through :meth:`Findings.take`.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from difflib import get_close_matches
from typing import TypeVar

from tapband.nouns.errors import Fault, InputError

T = TypeVar("T")

ALIKE = 8
"""Faults of one kind that are listed; the rest of the kind are counted."""


class RuleError(Exception):
    """A value that breaks a rule: the rule, what stood there and what to do. It never leaves this package."""

    def __init__(self, rule: str, got: str = "", do: str = "") -> None:
        self.rule, self.got, self.do = rule, got, do
        super().__init__(rule)


class Findings:
    """Faults and warnings found so far."""

    def __init__(self) -> None:
        self._faults: list[Fault] = []
        self._counts: dict[tuple[str, str], int] = {}
        self._warnings: list[str] = []

    def add(self, where: str, rule: str, got: str = "", do: str = "", *, kind: str = "") -> None:
        """Note a fault. Of one ``kind`` (a column, say) only the first few are listed."""
        count = self._counts.get((kind, rule), 0)
        if kind:
            self._counts[kind, rule] = count + 1
        if not kind or count < ALIKE:
            self._faults.append(Fault(where=where, rule=rule, got=got, do=do))

    def warn(self, text: str) -> None:
        """Note a warning once."""
        if text not in self._warnings:
            self._warnings.append(text)

    @contextmanager
    def at(self, where: str, kind: str = "") -> Iterator[None]:
        """Give every refusal of the block its place."""
        try:
            yield
        except RuleError as error:
            self.add(where, error.rule, error.got, error.do, kind=kind)

    def take(self, where: str, read: Callable[[], T], default: T) -> T:
        """What ``read`` returns, or ``default`` with its refusal noted at ``where``."""
        with self.at(where):
            return read()
        return default

    def forget_repeats(self, since: int) -> None:
        """Drop faults noted after the first ``since`` that say of another place what was said before them."""
        said = {(fault.rule, fault.got, fault.do) for fault in self._faults[:since]}
        new = [fault for fault in self._faults[since:] if (fault.rule, fault.got, fault.do) not in said]
        self._faults[since:] = new

    def __len__(self) -> int:
        return len(self._faults)

    @property
    def warnings(self) -> tuple[str, ...]:
        """Warnings in the order they were found."""
        return tuple(self._warnings)

    def raise_if_any(self) -> None:
        """Raise all faults together."""
        more = [
            Fault(where=kind, rule=rule, got=f"{count - ALIKE} more like the above")
            for (kind, rule), count in self._counts.items()
            if count > ALIKE
        ]
        if self._faults:
            raise InputError(dict.fromkeys([*self._faults, *more]))


def shown(value: object) -> str:
    """A value as it stands in a TOML file."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        text = value if len(value) <= 60 else value[:57] + "..."
        return '"' + text.replace("\n", "\\n") + '"'
    if isinstance(value, (list, tuple)):
        body = ", ".join(shown(item) for item in value[:6])
        return "[" + body + (", ...]" if len(value) > 6 else "]")
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{key} = {shown(item)}" for key, item in list(value.items())[:6]) + " }"
    if value is None:
        return "nothing"
    return str(value)


def nearest(word: str, known: Iterable[str]) -> str | None:
    """The known word nearest to this one, if any is near."""
    pool = {name.lower(): name for name in known}
    inside = [name for name in pool if len(word) > 1 and word.lower() in re.split(r"[^a-z]", name)]
    if len(inside) == 1:
        return pool[inside[0]]
    found = get_close_matches(word.lower(), list(pool), n=1, cutoff=0.6)
    return pool[found[0]] if found else None


def offer(word: str, known: Iterable[str]) -> str:
    """What to write instead of an unknown word: the nearest known one, else all of them."""
    names = list(known)
    near = nearest(word, names)
    if near is not None:
        return f'write "{near}"'
    if not names:
        return "remove it"
    listed = ", ".join(f'"{name}"' for name in names[:16])
    return f"write one of {listed}" if len(names) <= 16 else f"write one of {listed}, ..."


def listed(names: Iterable[str], most: int = 6) -> str:
    """Names in words, the tail counted."""
    names = list(names)
    if len(names) > most:
        return ", ".join(names[:most]) + f" and {len(names) - most} more"
    return ", ".join(names)
