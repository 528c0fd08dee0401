"""Looks at a problem where few trials would: far out along its gradients, and one latent at a time."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Draws
from tapband.probability.distributions import half_width, log_coefficients
from tapband.probability.draws import block
from tapband.probability.model import Model
from tapband.probability.trials import Tiles, linear_values

Array = NDArray[np.float64]


_NEAR, _FAR = 1.25, 3.8
"""Standard deviations between near probes, and to the far ones."""


def probe(model: Model, points: range) -> tuple[Array, Array]:
    """What is left of the linear model far out, and how much of that a smooth function would not have (Pb, m).

    Along each output's own gradient, at ±3.8 standard deviations: the largest difference, and the largest
    departure from the polynomial of fourth degree through the differences at 0, ±1.25 and ±2.5. A cliff that few
    trials would meet shows here. Bounded latents move less, so that they reach their bounds at the far end.
    """
    where = slice(points.start, points.stop)
    steps = np.array([-_FAR, -2.0 * _NEAR, -_NEAR, _NEAR, 2.0 * _NEAR, _FAR])
    unit = np.where(model.live[where], model.u[where], np.inf)[..., None]
    draws: dict[int, Array] = {}
    for f, family in enumerate(model.families):
        along = model.sensitivity[f][where] / unit
        reach = _FAR * np.abs(along).max(axis=-1, initial=0.0)[..., None]
        bound = half_width(family.shape, family.top)
        along = along * np.where(reach > bound, bound / np.where(reach > 0.0, reach, 1.0), 1.0)
        draws[f] = np.concatenate([step * along for step in steps], axis=1)
    y = model.problem.evaluate(where, draws)
    outputs = model.estimate.shape[1]
    left = y - linear_values(model, points, draws, y.shape[1])
    # Output j along its own gradient alone is judged for smoothness, all of them for size.
    own = left.reshape(len(points), steps.size, outputs, outputs)[
        :, :, np.arange(outputs), np.arange(outputs)
    ]
    nodes = np.array([-2.0, -1.0, 0.0, 1.0, 2.0]) * _NEAR
    vander = np.linalg.inv(np.vander(nodes, increasing=True))
    rough = np.zeros((len(points), outputs))
    for end, place in ((-_FAR, 0), (_FAR, -1)):
        weights = np.vander(np.array([end]), 5, increasing=True)[0] @ vander
        # At 0 nothing is left.
        inner = sum(weights[k if k < 2 else k + 1] * own[:, k + 1] for k in range(4))
        rough = np.maximum(rough, np.abs(own[:, place] - inner))
    return np.abs(left).max(axis=1), rough


_EDGEWORTH = 0.3
"""An end z moves by κ4 (z³ − 3z)/24 (first Edgeworth term); this covers levels up to 0.999."""


def shape_weight(model: Model, points: range, out: tuple[int, ...]) -> Array:
    """How far (Pb, m) the shape of the law of ``out`` moves an end at all, in units of u."""
    where = slice(points.start, points.stop)
    unit = np.where(model.live[where], model.u[where], np.inf)
    fourth = np.zeros(unit.shape)
    for f in out:
        square = model.sensitivity[f][where] ** 2
        fourth += abs(_fourth(model, f)) * (square * square).sum(axis=-1)
    weight: Array = _EDGEWORTH * fourth / unit**4
    return weight


def shape_error(model: Model, points: range, out: tuple[int, ...], tiles: Tiles, trials: int = 2) -> Array:
    """How far (Pb, m) the law of ``out`` may be from scaling as a whole, as a shift of an end in units of u.

    Given the other latents the outputs are affine in ``out``: unit steps give every sensitivity exactly, and
    with them the fourth cumulant, which is compared with that of the nominal law brought to the same variance.
    """
    where = slice(points.start, points.stop)
    inside = [f for f in range(len(model.families)) if f not in out]
    draws = block(model.families, inside, points, tiles.seed, 0, tiles.size)
    few = {f: np.ascontiguousarray(xi[:, :trials]) for f, xi in draws.items()}
    _, added = model.problem.given(where, few, out)
    nominal = model.u[where] ** 2 * model.share[where][:, :, list(out)].sum(axis=-1)
    # A normal latent has no fourth cumulant.
    bent = [f for f in out if _fourth(model, f) != 0.0]
    slopes = _unit_steps(model, points, few, bent, trials)
    weight = np.repeat([_fourth(model, f) for f in bent], [len(model.families[f].members) for f in bent])
    still = np.concatenate([model.sensitivity[f][where] for f in bent], axis=-1)
    live = model.live[where]
    variance = sum((added[f] for f in out), start=np.zeros((1, 1, 1)))
    ratio = variance / np.where(live & (nominal > 0.0), nominal, 1.0)[:, None]
    there, here = (weight * slopes**4).sum(axis=-1), (weight * still**4).sum(axis=-1)[:, None] * ratio**2
    unit = np.where(live, model.u[where], np.inf)
    error: Array = _EDGEWORTH * np.abs(there - here).mean(axis=1) / unit**4
    return error


def _unit_steps(model: Model, points: range, few: Draws, bent: list[int], trials: int) -> Array:
    """∂y/∂ξ (Pb, trials, m, ΣG) by unit steps of each latent of the families ``bent`` at a few draws."""
    counts = [len(model.families[f].members) for f in bent]
    steps = 1 + sum(counts)
    repeated: dict[int, Array] = {f: np.repeat(xi, steps, axis=1) for f, xi in few.items()}
    start = 1
    for f, count in zip(bent, counts, strict=True):
        one = np.zeros((steps, count))
        one[start : start + count] = np.eye(count)
        repeated[f] = np.tile(one, (trials, 1))[None]
        start += count
    y = model.problem.evaluate(slice(points.start, points.stop), repeated)
    y = np.broadcast_to(y, (len(points), *y.shape[1:])).reshape(len(points), trials, steps, -1)
    return np.moveaxis(y[:, :, 1:] - y[:, :, :1], 2, -1)


def _fourth(model: Model, f: int) -> float:
    """Excess kurtosis of a family's latents."""
    family = model.families[f]
    return 24.0 * log_coefficients(family.shape, family.top)[0]
