"""How large an error is: every statement of a size becomes terms and the divisor to a standard uncertainty.

*Source* JCGM 100:2008, 4.3; level of confidence 4.3.4, unequal limits 4.3.8.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from math import inf, sqrt
from statistics import NormalDist

from tapband.files.acts import ACTS, CHORDS, Arrangement
from tapband.files.faults import Findings, RuleError, shown
from tapband.files.model import StatedPart
from tapband.files.units import PRESSURE, bare, chords, fraction, quantity, split
from tapband.nouns.source import Scale, Shape, Size, Term, divisor_of

STATEMENTS = ("standard", "expanded", "limits", "lower", "upper", "resolution")
_PER_CENT = {
    re.compile(r"%\s*of\s+(the\s+)?readings?"): Scale.READING,
    re.compile(r"%\s*of\s+(the\s+)?full[\s-]*scale"): Scale.FULL_SCALE,
}
MOST_DOUBT = 1.0 / sqrt(3.0)
"""Relative doubt at which a half-width that varies uniformly would reach zero."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Measured:
    """What a size is a size of: the acts of one dimension, the readings there are, the chord [m]."""

    acts: tuple[str, ...]
    arrangement: Arrangement
    chord: float

    @property
    def dimension(self) -> str:
        """The dimension of the acts."""
        return ACTS[self.acts[0]].dimension

    def term(self, value: object) -> Term:
        """A symmetric term of this half-width (or standard uncertainty)."""
        size, scale = self.size(value)
        if size < 0.0:
            raise RuleError("must not be negative", shown(value), "write it without the sign")
        return Term(lower=-size, upper=size, scale=scale)

    def size(self, value: object) -> tuple[float, Scale]:
        """A size in SI units (lengths on the contour in chords), or as a fraction of what it multiplies."""
        number, name = split(value)
        if name.startswith("%") and not re.fullmatch(r"%\s*(of\s+)?chord", name):
            return number / 100.0, self._scale(value, number, name)
        if self.dimension == CHORDS:
            return chords(value, self.chord), Scale.ABSOLUTE
        also = '"0.05 % of full scale"' if self.dimension == PRESSURE else ""
        return quantity(value, self.dimension, also=also), Scale.ABSOLUTE

    def _scale(self, value: object, number: float, name: str) -> Scale:
        scale = next((scale for form, scale in _PER_CENT.items() if form.fullmatch(name)), None)
        if scale is None:
            do = f'write "{bare(number)} % of reading"'
            do += f' or "{bare(number)} % of full scale"' if self.dimension == PRESSURE else " or a size"
            raise RuleError("must say per cent of what", shown(value), do)
        unread = [act for act in self.acts if not self.arrangement.channel(act)]
        if scale is Scale.READING and unread:
            raise RuleError(f"{unread[0]} has no reading here", shown(value), "write an absolute size")
        if scale is Scale.FULL_SCALE and self.dimension != PRESSURE:
            raise RuleError(f"{self.acts[0]} has no full scale", shown(value), "write an absolute size")
        return scale


def read_size(
    part: StatedPart,
    of: Measured,
    at: Callable[[str], str],
    whole: str,
    findings: Findings,
    *,
    doubtful: bool,
) -> Size | None:
    """The size a source states, None with its faults noted.

    ``at`` gives the place of a key, ``whole`` that of the source; where keys were refused before
    (``doubtful``), nothing is said of a size that seems to be absent.
    """
    before = len(findings)
    stated = [name for name in STATEMENTS if getattr(part, name) is not None]
    kinds = {"lower and upper" if name in {"lower", "upper"} else name for name in stated}
    if len(kinds) != 1:
        if kinds or not doubtful:
            rule = "must state its size once" if kinds else "must state its size"
            got = " and ".join(sorted(kinds)) if kinds else "nothing"
            do = "keep one" if kinds else "write standard, expanded, limits, lower with upper, or resolution"
            findings.add(whole, rule, got, do)
        return None
    _check_company(part, next(iter(kinds)), at, findings, doubtful=doubtful)
    dof, reliability = _doubt(part, at, whole, findings)
    terms = _terms(part, stated, of, at, findings, doubtful=doubtful)
    divisor, shape = _divisor(part, stated[0], whole, findings, doubtful=doubtful)
    if len(findings) > before or not terms:
        return None
    return Size(
        terms=terms, divisor=divisor, shape=shape, top=part.top or 0.0 if shape is Shape.TRAPEZOIDAL else 0.0,
        dof=dof, reliability=reliability,
    )  # fmt: skip


def _check_company(
    part: StatedPart, kind: str, at: Callable[[str], str], findings: Findings, *, doubtful: bool
) -> None:
    """Note keys that do not go with this kind of size."""
    belongs = {"k": "expanded", "level": "expanded", "shape": "limits", "top": "limits"}
    for key, owner in belongs.items():
        value = getattr(part, key)
        bounded = owner == "limits" and kind in {"limits", "lower and upper"}
        if value is not None and kind != owner and not bounded:
            with_what = "expanded" if owner == "expanded" else "limits, or lower and upper"
            findings.add(
                at(key),
                f"goes with {with_what} only",
                f"{key} = {shown(value)} beside {kind}",
                f"remove {key}",
            )
    idle = part.top is not None and part.shape != "trapezoidal" and not doubtful
    if idle and kind in {"limits", "lower and upper"}:
        findings.add(
            at("top"),
            'goes with shape = "trapezoidal" only',
            shown(part.top),
            'write shape = "trapezoidal" or remove top',
        )
    if part.shape == "trapezoidal" and part.top is None and not doubtful:
        findings.add(at("shape"), "needs top", '"trapezoidal"', "write top = 0.5, or another from 0 to 1")


def _doubt(part: StatedPart, at: Callable[[str], str], whole: str, findings: Findings) -> tuple[float, float]:
    """Degrees of freedom and relative doubt."""
    if part.dof is not None and part.reliability is not None:
        findings.add(whole, "must state its doubt once", "dof and reliability", "keep one")
    reliability = 0.0
    if part.reliability is not None:
        value = part.reliability
        reliability = findings.take(at("reliability"), lambda: fraction(value), 0.0)
        if not 0.0 <= reliability < MOST_DOUBT:
            findings.add(
                at("reliability"), "must be from 0 to 57 %", shown(value), 'write for example "25 %"'
            )
    return (part.dof if part.dof is not None else inf), reliability


def _terms(
    part: StatedPart, stated: list[str], of: Measured, at: Callable[[str], str], findings: Findings, *,
    doubtful: bool,
) -> tuple[Term, ...]:  # fmt: skip
    """The terms of the size; empty where one is refused."""
    name = stated[0]
    if name in {"lower", "upper"}:
        term = _unequal(part, of, at, findings, doubtful=doubtful)
        return (term,) if term else ()
    value = getattr(part, name)
    if not isinstance(value, list):
        term = findings.take(at(name), lambda: of.term(value), None)
        if term is not None and name == "resolution":
            term = Term(lower=0.5 * term.lower, upper=0.5 * term.upper, scale=term.scale)
        return (term,) if term else ()
    places = [f"{at(name)}[{i + 1}]" for i in range(len(value))]
    found = [
        findings.take(place, partial(of.term, item), None) for place, item in zip(places, value, strict=True)
    ]
    return tuple(term for term in found if term is not None)


def _unequal(
    part: StatedPart, of: Measured, at: Callable[[str], str], findings: Findings, *, doubtful: bool
) -> Term | None:
    """The term of a lower and an upper limit of the true value less the reading."""
    if part.lower is None or part.upper is None:
        here, other = ("lower", "upper") if part.upper is None else ("upper", "lower")
        if not doubtful:
            findings.add(
                at(here), f"needs {other} beside it", shown(getattr(part, here)), f"write {other}, or limits"
            )
        return None
    lower = findings.take(at("lower"), lambda: of.size(part.lower), None)
    upper = findings.take(at("upper"), lambda: of.size(part.upper), None)
    if lower is None or upper is None:
        return None
    got = f"lower = {shown(part.lower)}, upper = {shown(part.upper)}"
    scales = {scale for size, scale in (lower, upper) if size != 0.0}
    if len(scales) > 1:
        findings.add(
            at("lower"), "must be of the same kind as upper", got, "write both as sizes, or both in per cent"
        )
        return None
    if lower[0] > upper[0]:
        findings.add(at("lower"), "must not be above upper", got, "swap them")
        return None
    return Term(lower=lower[0], upper=upper[0], scale=scales.pop() if scales else lower[1])


def _divisor(
    part: StatedPart, name: str, whole: str, findings: Findings, *, doubtful: bool
) -> tuple[float, Shape]:
    """Stated size over standard uncertainty, and the distribution."""
    match name:
        case "standard":
            return 1.0, Shape.NORMAL
        case "expanded":
            if (part.k is None) == (part.level is None):
                if not doubtful or part.k is not None:
                    got = "both" if part.k is not None else "neither"
                    findings.add(
                        whole, "must state k or level beside expanded", got, "write k = 2.0 or level = 0.95"
                    )
                return 1.0, Shape.NORMAL
            if part.k is not None:
                return part.k, Shape.NORMAL
            return NormalDist().inv_cdf(0.5 * (1.0 + (part.level or 0.0))), Shape.NORMAL
        case "resolution":
            return divisor_of(Shape.RECTANGULAR), Shape.RECTANGULAR
    shape = Shape(part.shape or "rectangular")
    return divisor_of(shape, part.top or 0.0), shape
