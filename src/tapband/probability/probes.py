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


def probe(model: Model, points: range, distance: float = 3.0) -> tuple[Array, Array]:
    """y and l (Pb, 2m, m) at ± ``distance`` standard deviations along each output's own gradient.

    Bounded latents stop at their bounds. A cliff that few trials would meet shows here.
    """
    where = slice(points.start, points.stop)
    unit = np.where(model.live[where], model.u[where], np.inf)[..., None]
    draws: dict[int, Array] = {}
    for f, family in enumerate(model.families):
        along = distance * model.sensitivity[f][where] / unit
        both = np.concatenate([along, -along], axis=1)
        bound = half_width(family.shape, family.top)
        draws[f] = np.clip(both, -bound, bound)
    y = model.problem.evaluate(where, draws)
    return y, linear_values(model, points, draws, y.shape[1])


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
    # Edgeworth: an end z moves by κ4 (z³ − 3z)/24; 0.3 covers levels up to 0.999.
    error: Array = 0.3 * np.abs(there - here).mean(axis=1) / unit**4
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
