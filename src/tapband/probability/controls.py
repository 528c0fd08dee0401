"""Second-order control variates: functions of a few drawn coordinates, whose means are known exactly.

What the linear model leaves of an output is mostly curvature along the few directions that matter. Regressing
on squares, waves and products of those coordinates takes it out: every mean becomes a weighted mean, with
weights that do not depend on what is averaged, and what scatters is the remainder of the regression. Waves
are bounded, where a fourth power would let one trial far out outweigh all others.

*Source* R. Y. Rubinstein, R. Marcus, Efficiency of multivariate control variates, Oper. Res. 33 (1985) 661.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations, pairwise

import numpy as np
from numpy.typing import NDArray

from tapband.probability.distributions import characteristic
from tapband.probability.model import Model

Array = NDArray[np.float64]

COORDINATES = 2
WAVE = 1.5
PAIRS = COORDINATES * (COORDINATES - 1) // 2
_FOLDS = 4
_FULL = 1_024
_LEAST = 0.002
"""Share of variance from which a family is worth a coordinate."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Coordinates:
    """Unit vectors (Pb, G) in the latents of some families, and for each point which of them count."""

    units: Mapping[int, Array]
    chosen: NDArray[np.intp]
    """(Pb, COORDINATES) families, −1 where a point has fewer."""
    wave: Array
    """(Pb, COORDINATES) means of cos(WAVE · x)."""

    def values(self, draws: Mapping[int, Array], roots: Mapping[int, Array], size: int) -> Array:
        """Coordinates (Pb, T, COORDINATES) at draws, the common scale ``roots`` of a family taken out again."""
        along = {}
        for f, unit in self.units.items():
            x = (draws[f] @ unit[:, :, None])[..., 0]
            along[f] = x / roots[f] if f in roots else x
        result = np.zeros((len(self.chosen), size, COORDINATES))
        for point, families in enumerate(self.chosen):
            for k, f in enumerate(families):
                if f >= 0:
                    result[point, :, k] = along[f][point]
        return result


def coordinates(model: Model, points: range, drawn: Sequence[int]) -> Coordinates:
    """One coordinate each for the drawn families that weigh most, along the gradient of the output they move most."""
    where = slice(points.start, points.stop)
    share = model.share[where][:, :, list(drawn)]
    weight = share.max(axis=1, initial=0.0)
    order = np.argsort(-weight, axis=1, kind="stable")[:, :COORDINATES]
    chosen = np.full((len(points), COORDINATES), -1, dtype=np.intp)
    wave = np.full((len(points), COORDINATES), 1.0)
    units: dict[int, Array] = {}
    for row, places in enumerate(order):
        for k, place in enumerate(places):
            if weight[row, place] < _LEAST:
                continue
            f = drawn[place]
            gradient = model.sensitivity[f][points[row], int(share[row, :, place].argmax())]
            unit = gradient / np.sqrt((gradient * gradient).sum())
            units.setdefault(f, np.zeros((len(points), unit.size)))[row] = unit
            chosen[row, k] = f
            family = model.families[f]
            wave[row, k] = np.prod(characteristic(family.shape, family.top, WAVE * unit))
    return Coordinates(units=units, chosen=chosen, wave=wave)


def controls_of(x: Array, wave: Array, correlation: Array) -> Array:
    """Controls (Pb, K, N) of mean 0 from coordinates x (Pb, c, N) of unit variance, symmetric.

    Second degree alone for few trials: more would fit their own noise.

    ``correlation`` (Pb, pairs) of the coordinates, 0 where they are independent.
    """
    live = np.where(np.any(x != 0.0, axis=-1), 1.0, 0.0)[..., None]
    full = x.shape[-1] >= _FULL
    parts = [x, x * x - live]
    sine, cosine = np.sin(WAVE * x), np.cos(WAVE * x)
    if full:
        parts += [sine, (cosine - wave[..., None]) * live]
    for place, (a, b) in enumerate(combinations(range(x.shape[1]), 2)):
        cross = [x[:, a] * x[:, b] - correlation[:, place, None]]
        if full:
            cross += [sine[:, a] * cosine[:, b], cosine[:, a] * sine[:, b]]
        parts.append(np.stack(cross, axis=1))
    return np.ascontiguousarray(np.concatenate(parts, axis=1))


class Regression:
    """Weighted means over N trials, controlled by variates (Pb, K, N) of mean 0.

    The coefficients for each quarter of the trials come from the other three, so that the means are unbiased
    and the remainders are those of a prediction, not of a fit.
    """

    def __init__(self, controls: Array) -> None:
        self._trials = n = controls.shape[-1]
        edges = [n * k // _FOLDS for k in range(_FOLDS + 1)]
        self._folds = [slice(a, b) for a, b in pairwise(edges)]
        self._controls = controls
        self._weights = np.full((len(controls), n), 1.0 / n)
        self._inverses: list[Array] = []
        self._means: list[Array] = []
        parts = [controls[..., fold] for fold in self._folds]
        sums = [part.sum(axis=-1) for part in parts]
        grams = [part @ np.swapaxes(part, -1, -2) for part in parts]
        for fold, held_out in zip(self._folds, sums, strict=True):
            count = n - (fold.stop - fold.start)
            mean = (_total(sums) - held_out) / count
            gram = _total(grams) - grams[len(self._inverses)]
            gram = gram / count - mean[..., None] * mean[:, None, :]
            k = np.arange(gram.shape[-1])
            variance = gram[:, k, k]
            # A control that a point has no use for is 0 throughout.
            gram[:, k, k] = np.where(variance > 0.0, variance * (1.0 + 1e-9), 1.0)
            inverse = np.linalg.inv(gram)
            pull = (inverse @ held_out[..., None])[:, :, 0] / (n * count)
            for other, part in zip(self._folds, parts, strict=True):
                if other != fold:
                    away = part - mean[..., None]
                    self._weights[:, other] -= (pull[:, None, :] @ away)[:, 0]
            self._inverses.append(inverse)
            self._means.append(mean)

    def mean(self, values: Array) -> Array:
        """Mean (Pb, m) of values (Pb, m, N)."""
        result: Array = (values * self._weights[:, None, :]).sum(axis=-1)
        return result

    def spread(self, values: Array) -> tuple[Array, Array]:
        """Standard deviation of that mean, and its own relative standard deviation, by which it is enlarged.

        *Source* var(s²) = (m4 − s⁴)/n to leading order.
        """
        n = self._trials
        rest = self._rest(values)
        rest -= rest.mean(axis=-1)[..., None]
        square = rest * rest
        second = square.sum(axis=-1) / (n - 1)
        fourth = (square * square).sum(axis=-1) / n
        positive = np.where(second > 0.0, second, 1.0)
        kurtosis = np.where(second > 0.0, fourth / (positive * positive), 1.0)
        doubt = 0.5 * np.sqrt(np.maximum(kurtosis - 1.0, 0.0) / n)
        return np.sqrt(second / n) * (1.0 + doubt), doubt

    def _rest(self, values: Array) -> Array:
        """What the controls, with coefficients from the other folds, leave of the values (Pb, m, N)."""
        rest = values.copy()
        parts = [self._controls[..., fold] for fold in self._folds]
        products = [
            values[..., fold] @ np.swapaxes(part, -1, -2)
            for fold, part in zip(self._folds, parts, strict=True)
        ]
        sums = [values[..., fold].sum(axis=-1) for fold in self._folds]
        for k, fold in enumerate(self._folds):
            count = self._trials - (fold.stop - fold.start)
            mean = (_total(sums) - sums[k])[..., None] / count
            covariance = (_total(products) - products[k]) / count - mean * self._means[k][:, None, :]
            rest[..., fold] -= (covariance @ self._inverses[k]) @ parts[k]
        return rest


def _total(parts: list[Array]) -> Array:
    total = parts[0]
    for part in parts[1:]:
        total = total + part
    return total
