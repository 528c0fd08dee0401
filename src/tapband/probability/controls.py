"""Second-order control variates: polynomials of a few drawn coordinates, whose means are known exactly.

What the linear model leaves of an output is mostly curvature along the few directions that matter. Regressing
on powers and products of those coordinates takes it out: every mean becomes a weighted mean, with weights
that do not depend on what is averaged, and what scatters is the remainder of the regression.

*Source* R. Y. Rubinstein, R. Marcus, Efficiency of multivariate control variates, Oper. Res. 33 (1985) 661.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from tapband.probability.distributions import log_coefficients
from tapband.probability.model import Model

Array = NDArray[np.float64]

COORDINATES = 2
PAIRS = COORDINATES * (COORDINATES - 1) // 2
_LEAST = 0.002
"""Share of variance from which a family is worth a coordinate."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Coordinates:
    """Unit vectors (Pb, G) in the latents of some families, and for each point which of them count."""

    units: Mapping[int, Array]
    chosen: NDArray[np.intp]
    """(Pb, COORDINATES) families, −1 where a point has fewer."""
    fourth: Array
    """(Pb, COORDINATES) fourth moments."""

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
    fourth = np.full((len(points), COORDINATES), 3.0)
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
            excess = 24.0 * log_coefficients(model.families[f].shape, model.families[f].top)[0]
            fourth[row, k] = 3.0 + excess * float((unit**4).sum())
    return Coordinates(units=units, chosen=chosen, fourth=fourth)


def polynomials(x: Array, fourth: Array, correlation: Array) -> Array:
    """Controls (Pb, K, N) of mean 0 from coordinates x (Pb, c, N) of unit variance, symmetric.

    ``correlation`` (Pb, pairs) of the coordinates, 0 where they are independent.
    """
    square = x * x
    live = np.where(np.any(x != 0.0, axis=-1), 1.0, 0.0)[..., None]
    parts = [x, square - live, square * x, (square * square - fourth[..., None]) * live]
    pairs = list(combinations(range(x.shape[1]), 2))
    for place, (a, b) in enumerate(pairs):
        product = x[:, a] * x[:, b]
        cross = [product - correlation[:, place, None], x[:, a] * product, x[:, b] * product]
        parts.append(np.stack(cross, axis=1))
    return np.ascontiguousarray(np.concatenate(parts, axis=1))


class Regression:
    """Weighted means over N trials (…, N), controlled by (Pb, K, N) variates of mean 0."""

    def __init__(self, controls: Array) -> None:
        self._trials = controls.shape[-1]
        mean = controls.mean(axis=-1)
        self._away = controls - mean[..., None]
        gram = self._away @ np.swapaxes(self._away, -1, -2) / self._trials
        # A control that a point has no use for is 0 throughout.
        k = np.arange(gram.shape[-1])
        variance = gram[:, k, k]
        gram[:, k, k] = np.where(variance > 0.0, variance * (1.0 + 1e-10), 1.0)
        self._inverse = np.linalg.inv(gram)
        pull = (self._inverse @ mean[..., None])[..., 0]
        self._weights = (1.0 - (pull[:, None, :] @ self._away)[:, 0]) / self._trials
        self._freedom = max(self._trials - 1 - controls.shape[1], 1)
        self._stretch = np.sqrt(1.0 + (pull * mean).sum(axis=-1))[:, None]

    def mean(self, values: Array) -> Array:
        """Mean (Pb, m) of values (Pb, m, N)."""
        return (values * self._weights[:, None, :]).sum(axis=-1)

    def spread(self, values: Array) -> tuple[Array, Array]:
        """Standard deviation of that mean, and its own relative standard deviation.

        *Source* var(s²) = (m4 − s⁴)/n to leading order.
        """
        n = self._trials
        away = values - values.mean(axis=-1)[..., None]
        slopes = (away @ np.swapaxes(self._away, -1, -2)) @ self._inverse / n
        away = away - slopes @ self._away
        square = away * away
        second = square.sum(axis=-1) / self._freedom
        fourth = (square * square).sum(axis=-1) / n
        positive = np.where(second > 0.0, second, 1.0)
        kurtosis = np.where(second > 0.0, fourth / (positive * positive), 1.0)
        doubt = 0.5 * np.sqrt(np.maximum(kurtosis - 1.0, 0.0) / n)
        return np.sqrt(second / n) * self._stretch, doubt
