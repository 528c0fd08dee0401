"""Sources that every campaign has, under their reserved names; each is bounded, not corrected."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.bounds import edge_half_widths, rule_half_widths, spacing_half_widths
from tapband.nouns.campaign import Campaign, Closure
from tapband.nouns.problem import Family
from tapband.nouns.source import Shape
from tapband.reduction.live_sets import LiveSet
from tapband.reduction.loads import Entry, Loaded

Array = NDArray[np.float64]

SPACING, TRAILING_EDGE, REAR_LOADING = "finite tap spacing", "trailing edge", "rear loading"
SCATTER, RULE = "scatter of samples", "compressibility rule"
RESERVED = (SPACING, TRAILING_EDGE, REAR_LOADING, SCATTER, RULE)
ROOT3 = np.sqrt(3.0)


def automatic(
    campaign: Campaign, sets: Sequence[LiveSet], cp: Array, mach: Array, alpha: Array, outputs: int
) -> list[Loaded]:
    """The automatic families but the scatter of samples.

    cp (P, n) with zeros at dead taps, mach and alpha (P,) [rad]; ``outputs`` the number of coefficients m.
    """
    size = len(cp)
    spacing, rule = np.zeros((size, outputs, 3)), np.zeros((size, outputs, 1))
    common, loading = np.zeros(size), np.zeros(size)
    keys = np.empty(size, dtype=object)
    for one in sets:
        i = one.points
        keys[i] = one.key
        common[i], loading[i] = edge_half_widths(one.equation, cp[i])
        spacing[i] = spacing_half_widths(one.equation, cp[i], mach[i], alpha[i])
        if one.equation.compressibility != "none":
            rule[i] = rule_half_widths(one.equation, cp[i], mach[i], alpha[i])
    alike, everywhere = tuple(keys.tolist()), ("",) * size
    made = []
    if campaign.reduction.spacing:
        made.append(_loaded(SPACING, alike, _added(spacing)))
    if not any("trailing-edge coefficient" in source.acts_on for source in campaign.sources):
        closure = campaign.reduction.trailing_edge
        if isinstance(closure, Closure):
            stated = _scalar("edge_common", np.full(size, closure.standard * ROOT3))
            made.append(_loaded(TRAILING_EDGE, everywhere, stated, Shape.NORMAL))
        else:
            made.append(_loaded(TRAILING_EDGE, alike, _scalar("edge_common", common)))
            made.append(_loaded(REAR_LOADING, alike, _scalar("edge_loading", loading)))
    if campaign.reduction.compressibility != "none":
        made.append(_loaded(RULE, everywhere, _added(rule)))
    return made


def scatter(loads: Array, batches: Array, keys: tuple[str, ...]) -> Loaded:
    """The scatter of each point's samples, outside the taps.

    ``loads`` (P, m, G) is a factor of the covariance of the mean coefficients, zero at points with one row;
    ``batches`` (P,) their number, 0 where there are none.
    """
    count = loads.shape[2]
    family = Family(
        source=SCATTER,
        members=tuple(str(i + 1) for i in range(count)),
        point_group=keys,
        scale_group=keys,
        shape=Shape.NORMAL,
        dof=np.where(batches > 1, batches - 1.0, np.inf),
        systematic=False,
        linear=True,
    )
    entry = Entry(slot="added", member=np.arange(count), load=loads)
    return Loaded(
        family=family, group=SCATTER, entries=(entry,), standard=np.full(len(loads), np.nan), unit="1"
    )


def _added(half_widths: Array) -> Entry:
    return Entry(slot="added", member=np.arange(half_widths.shape[2]), load=half_widths / ROOT3)


def _scalar(slot: str, half_width: Array) -> Entry:
    return Entry(slot=slot, member=np.zeros(1, dtype=np.int64), load=half_width / ROOT3)


def _loaded(name: str, groups: tuple[str, ...], entry: Entry, shape: Shape = Shape.RECTANGULAR) -> Loaded:
    family = Family(
        source=name,
        members=tuple(str(i + 1) for i in range(entry.member.size)),
        point_group=groups,
        scale_group=("",) * len(groups),
        shape=shape,
        dof=np.full(len(groups), np.inf),
        linear=True,
    )
    one_number = entry.load.ndim == 1
    standard = np.abs(entry.load) if one_number else np.full(len(entry.load), np.nan)
    return Loaded(family=family, group=name, entries=(entry,), standard=standard, unit="1")
