"""The declared errors that enter at taps, in terms that any tap layout can be judged by.

A new tap has no channel yet: per cent of full scale are of the median full scale; what taps share by a
grouping column (a module, a row) is shared here by every k-th tap along the contour, k the number of groups.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.tap_flows import TapFlow
from tapband.nouns.source import COMMON, INDEPENDENT, Size, Source
from tapband.questions.basis import Basis
from tapband.reduction.loads import spread
from tapband.reduction.nominal import ON_TAPS, SLOT_OF

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class TapError:
    """One act of one source: its slot, size, the number of groups that share it (0: every tap its own)."""

    act: str
    size: Size
    groups: int
    full_scale: float


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class TapErrors:
    """All of them, at a dynamic pressure [Pa] and an offset between reading and p_static [Pa]."""

    errors: tuple[TapError, ...]
    q: float
    offset: float

    def variance(self, weight: Array, cp: Array, slope: Array, tangent_x: Array) -> Array:
        """(A, m) variance of coefficients from weights (A, m, n) at taps with cp, slope (A, n), tangent_x (n,)."""
        total = np.zeros(weight.shape[:2])
        for error in self.errors:
            moved = weight * self._load(error, cp, slope, tangent_x)[:, None, :]
            total += np.sum(_gathered(moved, error.groups) ** 2, axis=2)
        return total

    def _load(self, error: TapError, cp: Array, slope: Array, tangent_x: Array) -> Array:
        """(A, n) standard uncertainty of Cp at each tap, signed."""
        scale = np.asarray(error.full_scale)
        match error.act:
            case "tap pressure":
                return np.asarray(spread(error.size, cp * self.q - self.offset, scale) / self.q)
            case "tap coefficient":
                return spread(error.size, cp, scale)
            case _:
                moved = spread(error.size, np.zeros_like(cp), scale) * slope
                return np.asarray(moved * tangent_x if error.act == "tap row" else moved)


def tap_errors(basis: Basis) -> TapErrors:
    """The tap errors of the campaign planned for, at its first point's stream."""
    stream = basis.assembled.stream
    found = [
        TapError(
            act=act,
            size=source.size,
            groups=_groups(source, basis),
            full_scale=_full_scale(source, basis),
        )
        for source in basis.campaign.sources
        for act in source.acts_on
        if SLOT_OF.get(act) in ON_TAPS
    ]
    return TapErrors(errors=tuple(found), q=float(stream.q[0]), offset=float(stream.offset[0]))


def _groups(source: Source, basis: Basis) -> int:
    if source.across_taps == INDEPENDENT:
        return 0
    if source.across_taps in ("", COMMON):
        return 1
    column = basis.campaign.taps.columns[source.across_taps.removeprefix("by ")]
    live = basis.assembled.nominal.live.any(axis=0)
    return max(
        1,
        len({value for value, on in zip(column, np.atleast_1d(live).tolist(), strict=True) if on and value}),
    )


def _full_scale(source: Source, basis: Basis) -> float:
    if source.full_scale is not None:
        return source.full_scale
    scales = basis.campaign.taps.full_scale
    return float(np.nanmedian(scales)) if np.any(np.isfinite(scales)) else np.nan


def _gathered(moved: Array, groups: int) -> Array:
    """(A, m, G) from (A, m, n): taps of one group summed."""
    if groups == 0:
        return moved
    if groups == 1:
        return np.asarray(moved.sum(axis=2, keepdims=True))
    member = (np.arange(moved.shape[2])[:, None] % groups == np.arange(groups)).astype(np.float64)
    return np.asarray(moved @ member)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LayoutErrors:
    """What a layout makes of cn, ct, cm, cl, cd_pressure, each (A, 5)."""

    off: Array
    """The error of the exact flow's readings."""
    variance: Array
    """Of the tap errors."""
    spacing: Array
    """Variance that the interval allows for the finite number of taps."""


def layout_errors(flow: TapFlow, errors: TapErrors, s: Array) -> LayoutErrors:
    """The errors of taps at rising arc lengths s (n,) on the flow's contour [chords]."""
    made = flow.weights(s)
    cp = flow.cp(s)
    turn = _turn(flow.alpha)
    value = np.einsum("jkn,an->jak", made.by_cp, cp) + made.constant[:, None, :]
    value[0] -= flow.exact
    moved = np.einsum("amk,jak->jam", turn, value)
    tangent = flow.contour.tangent(s)[0]
    return LayoutErrors(
        off=moved[0],
        variance=errors.variance(np.matmul(turn, made.by_cp[0]), cp, flow.slope(s), tangent),
        spacing=np.sum(moved[1:] ** 2, axis=0) / 3.0,
    )


def _turn(alpha: Array) -> Array:
    """(A, 5, 3) from cn, ct, cm to cn, ct, cm, cl, cd_pressure."""
    matrix = np.zeros((alpha.size, 5, 3))
    matrix[:, 0, 0] = matrix[:, 1, 1] = matrix[:, 2, 2] = 1.0
    matrix[:, 3, 0] = matrix[:, 4, 1] = np.cos(alpha)
    matrix[:, 4, 0] = np.sin(alpha)
    matrix[:, 3, 1] = -matrix[:, 4, 0]
    return matrix
