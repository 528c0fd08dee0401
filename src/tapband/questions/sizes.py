"""The size of a source as one number, and the same source at another size."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from tapband.nouns.source import Scale, Source, Term
from tapband.questions.basis import Basis
from tapband.reduction.loads import load

PER_CENT = {Scale.READING: "% of reading", Scale.FULL_SCALE: "% of full scale"}
TIMES = "times declared"


def stated_size(source: Source, basis: Basis) -> tuple[float, str]:
    """The standard uncertainty of a source and its unit.

    Where it differs between taps or points: per cent of reading or of full scale, as it is stated, or 1 in
    units of the declared size where several terms add.
    """
    loaded = load(source, basis.campaign, basis.raw, basis.assembled.nominal)
    standard = loaded.standard
    if standard.size and np.all(np.isfinite(standard)) and np.ptp(standard) <= 1e-12 * np.max(standard):
        return float(standard[0]), loaded.unit
    scales = {term.scale for term in source.size.terms}
    if len(scales) == 1:
        scale = scales.pop()
        if scale in PER_CENT:
            half = sum(abs(term.half) for term in source.size.terms)
            return 100.0 * half / source.size.divisor, PER_CENT[scale]
    return 1.0, TIMES


def scaled(source: Source, factor: float) -> Source:
    """The source with its half-widths times ``factor``; the correction that unequal limits imply stays."""
    terms = tuple(
        Term(lower=term.middle - factor * term.half, upper=term.middle + factor * term.half, scale=term.scale)
        for term in source.size.terms
    )
    return replace(source, size=replace(source.size, terms=terms))


def unit_sized(source: Source) -> Source:
    """The source with a standard uncertainty of 1 in SI units (1 % where it is relative) in place of zero."""
    first = source.size.terms[0]
    half = source.size.divisor * (1.0 if first.scale is Scale.ABSOLUTE else 0.01)
    middle = first.middle
    term = Term(lower=middle - half, upper=middle + half, scale=first.scale)
    return replace(source, size=replace(source.size, terms=(term,)))
