"""Which taps drive a coefficient: share of the variance, lever of a misplaced tap, change by its loss.

P points, m coefficients, n taps (dead ones keep their place, with nothing but zeros).

The share of a tap is that of its part y_i in the coefficient y = Σ y_i + (what does not enter at a tap):
cov(y_i, y)/u²(y). In latents, Σ_l s_il S_l / u², s_il the sensitivity through tap i and S_l the whole one.
Where no stream channel hangs on a module it is W_i (V W)_i / u², W the weights and V the covariance of the
placed tap coefficients. Shared errors can make it negative: that tap takes out what others bring in.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.chain import Equation, moved_nodes, prandtl_glauert, turn
from tapband.experiment.left_out import left_out
from tapband.nouns.symbols import MEASURED
from tapband.questions.rank_order import TIE, places
from tapband.questions.rank_slopes import Place, differentiated
from tapband.reduction.assemble import Assembled
from tapband.reduction.live_sets import equation_of
from tapband.reduction.loads import Loaded

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

NOT_AT_A_TAP = "(not at a tap)"
FEWEST, FEWEST_A_SIDE = 5, 2
"""Live taps that a reduction needs, in all and on each surface."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class TapRanking:
    """All NaN where the coefficient has no value; shares 0 where no error acts on it."""

    weight: Array
    """(P, m, n) ∂y/∂Cp of the tap."""
    share: Array
    """(P, m, n + 1), the last one what does not enter at a tap; they sum to 1."""
    if_lost: Array
    """(P, m, n) change of the coefficient when the tap is left out; NaN where too few taps would be left."""
    leverage: Array
    """(P, m, n) ∂y per chord of the tap's place along the contour."""
    rank: NDArray[np.int64]
    """(P, m, n + 1) by share among live taps; dead taps and the last entry stand behind them."""
    against: NDArray[np.int64]
    """(P, m, n) the source that takes most out of a negative share; −1 where the share is not negative."""


def rank_taps(assembled: Assembled) -> TapRanking:
    """Every tap at every point."""
    estimate = assembled.problem.estimate
    shape = (*estimate.shape, assembled.cp.shape[1])
    weight, leverage, lost = np.zeros(shape), np.zeros(shape), np.full(shape, np.nan)
    part, against = np.zeros((*estimate.shape, shape[2] + 1)), np.full(shape, -1)
    changes: dict[int, _Losses] = {}
    for place in differentiated(assembled):
        i = place.at.points
        weight[i], leverage[i] = place.slopes.extra, place.slopes.shift
        part[i], against[i] = _parts(assembled, place)
        key = id(place.equation)
        if key not in changes:
            changes[key] = _Losses.of(assembled, place.equation)
        lost[i] = changes[key].at(assembled, place)
    whole = part.sum(axis=2, keepdims=True)
    share = np.divide(part, whole, out=np.zeros_like(part), where=whole > 0.0)
    for values in (weight, share, lost, leverage):
        values[np.isnan(estimate)] = np.nan
    against[~(share[..., :-1] < -TIE)] = -1
    behind = np.full((*estimate.shape, 1), shape[2] + 1)
    live = np.where(assembled.nominal.live[:, None], share[..., :-1], np.nan)
    return TapRanking(
        weight=weight,
        share=share,
        if_lost=lost,
        leverage=leverage,
        rank=np.concatenate([places(live), behind], axis=2),
        against=against,
    )


def _parts(assembled: Assembled, place: Place) -> tuple[Array, NDArray[np.int64]]:
    """(P, m, n + 1) Σ_l s_il S_l at the points of one block, the last entry Σ_l s_0l S_l; then (P, m, n) the
    source whose part at a tap is the most negative."""
    i, shape = place.at.points, place.slopes.extra.shape
    total, rest = np.zeros(shape), np.zeros(shape[:2])
    worst, against = np.zeros(shape), np.full(shape, -1)
    for s, (loaded, sensitivity) in enumerate(
        zip(assembled.loaded, assembled.problem.sensitivity, strict=True)
    ):
        at_taps, elsewhere = _part(loaded, sensitivity[i], place)
        rest += elsewhere
        if at_taps is not None:
            total += at_taps
            against[at_taps < worst] = s
            np.minimum(worst, at_taps, out=worst)
    return np.concatenate([total, rest[..., None]], axis=2), against


def _part(loaded: Loaded, whole: Array, place: Place) -> tuple[Array | None, Array]:
    """What one source brings at each tap (P, m, n) and elsewhere (P, m); ``whole`` (P, m, G) is S."""
    i, slopes = place.at.points, place.slopes
    at_taps: Array | None = None
    elsewhere = np.zeros(whole.shape[:2])
    for entry in loaded.entries:
        load = entry.load[i]
        if entry.slot == "added":
            elsewhere += np.sum(load * whole[..., entry.member], axis=2)
        elif entry.on_taps:
            size = entry.member.size
            own = size <= whole.shape[2] and np.array_equal(entry.member, np.arange(size))
            partner = whole[..., :size] if own else whole[..., entry.member]
            part = getattr(slopes, entry.slot) * load[:, None, :] * partner
            at_taps = part if at_taps is None else at_taps + part
        else:
            elsewhere += slopes.scalars[entry.slot] * load[:, None] * whole[..., entry.member[0]]
    return at_taps, elsewhere


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Losses:
    """Rules of one live set without each of its taps: changed weights on its nodes, or an equation anew."""

    taps: NDArray[np.int64]
    change: Array
    """(K, 3, N)."""
    anew: Mapping[int, Equation]

    @classmethod
    def of(cls, assembled: Assembled, equation: Equation) -> _Losses:
        campaign, live = assembled.campaign, equation.quadrature.live
        usable = np.array([_enough(assembled, live, tap) for tap in range(live.size)])
        if not np.any(usable):
            none = np.zeros(0, dtype=np.int64)
            return cls(taps=none, change=np.zeros((0, 3, len(equation.quadrature.nodes_of))), anew={})
        found = left_out(
            assembled.contour,
            assembled.s,
            equation.quadrature,
            campaign.reduction.integration,
            campaign.section.full_arm,
        )
        plain = replace(campaign, reduction=replace(campaign.reduction, spacing=False))
        corrected = assembled.corrected
        kept = usable[found.taps]
        return cls(
            taps=found.taps[kept],
            change=found.change[kept],
            anew={
                int(tap): equation_of(
                    plain,
                    assembled.contour,
                    assembled.s,
                    live & (np.arange(live.size) != tap),
                    edge=corrected.edge,
                    centre=corrected.centre,
                )
                for tap in found.others[usable[found.others]]
            },
        )

    def at(self, assembled: Assembled, place: Place) -> Array:
        """(P, m, n) changes at the points of a block; zero at dead taps, which are left out already."""
        i, equation, cp = place.at.points, place.equation, place.at.cp
        mach, to_five = assembled.stream.mach[i], turn(equation, assembled.points.alpha[i])
        change = np.full(place.slopes.extra.shape, np.nan)
        change[..., ~equation.quadrature.live] = 0.0
        for block, values in enumerate(_node_values(equation, cp, mach)):
            rows = slice(len(MEASURED) * block, len(MEASURED) * (block + 1))
            integrals = _each(values, self.change.reshape(-1, values.shape[1]))
            change[:, rows, self.taps] = to_five @ integrals.reshape(len(cp), -1, 3).swapaxes(1, 2)
            whole = _each(values, equation.quadrature.node_weights[0])
            for tap, other in self.anew.items():
                left = _each(_node_values(other, cp, mach)[block], other.quadrature.node_weights[0])
                change[:, rows, tap] = (to_five @ (left - whole)[:, :, None])[:, :, 0]
        return change


def _enough(assembled: Assembled, live: Mask, tap: int) -> bool:
    """Whether a reduction without this live tap would be accepted."""
    if not live[tap]:
        return False
    left = live.copy()
    left[tap] = False
    upper = assembled.campaign.taps.upper
    return bool(left.sum() >= FEWEST and min((left & upper).sum(), (left & ~upper).sum()) >= FEWEST_A_SIDE)


def _node_values(equation: Equation, cp: Array, mach: Array) -> list[Array]:
    """(P, N) values that the weights act on: as measured and, with a rule, at the reference Mach number."""
    rule = equation.quadrature
    nodes = _each(cp, rule.nodes_of) + rule.nodes_constant
    if equation.compressibility == "none":
        return [nodes]
    if equation.on_coefficients:
        return [nodes, nodes * prandtl_glauert(equation, mach)[:, None]]
    return [nodes, moved_nodes(equation, nodes, mach)]


def _each(values: Array, rows: Array) -> Array:
    """(P, R) rows (R, N) times values (P, N), one point at a time: no point moves another's last digit."""
    return np.asarray((values[:, None, :] @ rows.T)[:, 0])
