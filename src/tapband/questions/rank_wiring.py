"""What the wiring costs: the same errors on taps that are independent, common, as wired, interleaved.

P points, m coefficients, R rows: each source of tap pressure alone, then all of them together; arrangements
in the order of ``ARRANGEMENTS``. Every other source stays as declared.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.campaign import Campaign
from tapband.nouns.source import COMMON, INDEPENDENT, Source
from tapband.probability.distributions import effective_dof
from tapband.probability.linearised import Linearised
from tapband.questions.rank import expanded
from tapband.questions.rank_slopes import by_latent, differentiated
from tapband.reduction.assemble import Assembled
from tapband.reduction.loads import Loaded, load

Array = NDArray[np.float64]

ARRANGEMENTS = ("independent", "common", "by module", "interleaved")
TOGETHER = "(all together)"
MODULE = "module"


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Wirings:
    """Contributions and expanded uncertainties (P, m, R, 4); NaN where the taps name no modules."""

    sources: tuple[str, ...]
    declared: tuple[str, ...]
    """How the campaign shares each across taps."""
    contribution: Array
    expanded: Array
    left_out: tuple[str, ...]
    """Sources of tap pressure that cannot be rewired, and why."""


def compare_wirings(assembled: Assembled, linear: Linearised, level: float) -> Wirings:
    """Every source of tap pressure under every arrangement, recomputed."""
    campaign = assembled.campaign
    fit, left_out = _rewired(campaign)
    names = [family.source for family in assembled.problem.families]
    columns = [names.index(source.name) for source in fit]
    variance = np.full((*linear.estimate.shape, len(fit), len(ARRANGEMENTS)), np.nan)
    variants = [
        (r, a, loaded)
        for r, source in enumerate(fit)
        for a, loaded in enumerate(_variants(source, assembled))
        if loaded is not None
    ]
    for place in differentiated(assembled) if variants else ():
        for r, a, loaded in variants:
            variance[place.at.points, :, r, a] = np.sum(by_latent(loaded, place) ** 2, axis=2)
    variance[np.isnan(linear.estimate)] = np.nan
    rows = [[r] for r in range(len(fit))] + ([list(range(len(fit)))] if len(fit) > 1 else [])
    nu = np.stack([effective_dof(f) for f in assembled.problem.families], axis=-1)[:, None, :]
    stands = linear.contribution**2
    found = [[_replaced(stands, nu, level, columns, variance, row, a) for a in range(4)] for row in rows]
    both = np.array(found).reshape(len(rows), len(ARRANGEMENTS), 2, *linear.estimate.shape)
    contribution, whole = np.moveaxis(both, (0, 1), (3, 4))
    extra = [TOGETHER] if len(fit) > 1 else []
    return Wirings(
        sources=(*(source.name for source in fit), *extra),
        declared=(*(source.across_taps for source in fit), *("" for _ in extra)),
        contribution=contribution,
        expanded=whole,
        left_out=left_out,
    )


def _replaced(
    stands: Array,
    nu: Array,
    level: float,
    columns: list[int],
    variance: Array,
    row: list[int],
    arrangement: int,
) -> tuple[Array, Array]:
    """Contribution of the sources of a row, and U with them rearranged, (P, m) each."""
    changed = stands.copy()
    changed[..., [columns[r] for r in row]] = variance[:, :, row, arrangement]
    part = variance[:, :, row, arrangement].sum(axis=2)
    return np.sqrt(part), expanded(changed, nu, level)


def _rewired(campaign: Campaign) -> tuple[list[Source], tuple[str, ...]]:
    """Sources that any wiring could carry, and those that none but their own can."""
    fit, left_out = [], []
    for source in campaign.sources:
        if "tap pressure" not in source.acts_on:
            continue
        if len(source.acts_on) > 1:
            left_out.append(f"{source.name}: acts on more than the taps, so its taps must share it")
        elif len(source.size.terms) > 1:
            left_out.append(f"{source.name}: several terms add without a sign, so no two taps can share it")
        else:
            fit.append(source)
    return fit, tuple(left_out)


def _variants(source: Source, assembled: Assembled) -> list[Loaded | None]:
    """The source's latents under each arrangement; None where the taps name no modules."""
    campaign, points = assembled.campaign, assembled.points
    column = module_column(source.across_taps, campaign)
    by_column = replace(source, across_taps=f"by {column}")
    pairs: list[tuple[Source, Campaign] | None] = [
        (replace(source, across_taps=INDEPENDENT), campaign),
        (replace(source, across_taps=COMMON), campaign),
        None if column is None else (by_column, campaign),
        None if column is None else (by_column, _interleaved(campaign, column)),
    ]
    return [None if pair is None else load(*pair, points, assembled.nominal) for pair in pairs]


def module_column(across_taps: str, campaign: Campaign) -> str | None:
    """The column of the tap table that says which module a tap is on; None where a live tap has none."""
    shared = across_taps not in ("", INDEPENDENT, COMMON)
    column = across_taps.removeprefix("by ") if shared else MODULE
    values = campaign.taps.columns.get(column, ())
    dead = campaign.taps.excluded.tolist()
    return column if values and all(v or gone for v, gone in zip(values, dead, strict=True)) else None


def members(across_taps: str, campaign: Campaign) -> tuple[tuple[str, ...] | None, ...]:
    """For each arrangement what each tap (n,) shares its error with; None where the taps name no modules."""
    taps, column = campaign.taps, module_column(across_taps, campaign)
    first = (taps.names, ("",) * len(taps.names))
    if column is None:
        return (*first, None, None)
    wired = taps.columns[column]
    return (*first, wired, interleaved(wired, taps.s, taps.excluded))


def _interleaved(campaign: Campaign, column: str) -> Campaign:
    """The campaign with neighbouring taps on different modules, as many as are wired, two at least."""
    taps = campaign.taps
    return replace(
        campaign,
        taps=replace(
            taps, columns={**taps.columns, column: interleaved(taps.columns[column], taps.s, taps.excluded)}
        ),
    )


def interleaved(values: tuple[str, ...], s: Array, dead: NDArray[np.bool_]) -> tuple[str, ...]:
    """Modules dealt out to live taps in turn along the contour; dead taps keep theirs."""
    names = sorted({value for value, gone in zip(values, dead.tolist(), strict=True) if not gone})
    if len(names) == 1:
        names.append(f"{names[0]} and another")
    dealt = list(values)
    for turn, tap in enumerate(t for t in np.argsort(s, kind="stable").tolist() if not dead[t]):
        dealt[tap] = names[turn % len(names)]
    return tuple(dealt)
