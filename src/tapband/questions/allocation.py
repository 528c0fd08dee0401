"""All sources sized together so that the targets are just met: shared out equally, or at the least cost.

Sizes are factors f on the declared standard uncertainties; automatic sources stay. With the room of a demand
B = (limit/k)² less what stays, and v the variance of a source as declared:

- equal: every source takes the same part of the room where it presses hardest, f² max_d(v/B) the same for all;
- least cost: Σ 1/f smallest, each source as dear as any other at its declared size and its cost inverse to
  its size, subject to Σ f² v ≤ B at every demand. In log f this is convex; with one demand f ~ v^(-1/3).

k depends on the answer through the degrees of freedom: it is found again until it stands, and the least cost
is then polished with k inside.

*Source* geometric programs: Boyd and Vandenberghe, Convex Optimization (2004), section 4.5.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.campaign import Campaign
from tapband.probability.linearised import coverage_factor
from tapband.questions.allowances import Allowance
from tapband.questions.basis import Basis, expanded_of
from tapband.questions.confirm import FAR, Confirmed, confirm, confirm_far
from tapband.questions.sizes import scaled

Array = NDArray[np.float64]

ROUNDS = 30
CONFIRMED = 2
"""Times that the ratio of the two intervals is found at an allocation."""
NEGLIGIBLE = 1e-20


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Allocation:
    """Factors (S,) on the declared sizes; NaN where a source stays as it is: no target depends on it, even zero
    fails, zero is declared, or what it does is not linear at its allowance.

    ``possible`` is false where what stays already passes a target; factors are then all NaN.
    """

    equal: Array
    least_cost: Array
    possible: bool


def allocation(
    basis: Basis, declared: Confirmed, alone: Sequence[Allowance], trials: str | None = None
) -> Allocation:
    """Both allocations of the declared sources, against the headline interval.

    ``declared`` are both intervals as declared; their ratio at an allocation is found there. ``alone`` are the
    allowances: a source that has none in the linearised sense stays as it is.
    """
    shared = np.array([one.straight and one.declared > 0.0 for one in alone], dtype=np.bool_)
    size = len(basis.campaign.sources)
    nothing = np.full(size, np.nan)
    first = np.where(np.isfinite(declared.factor), declared.factor, 1.0)
    found = []
    for rule in (_equal, _least_cost):
        parts = _parts(basis, first, shared)
        if np.any(parts.ratio(np.zeros(size)) >= 1.0):
            return Allocation(equal=nothing, least_cost=nothing, possible=False)
        sizes = _settled(parts, rule)
        for _ in range(CONFIRMED if np.any(np.isfinite(sizes)) else 0):
            look = confirm_far if float(np.nanmax(sizes)) > FAR else confirm
            seen = look(resized(basis.campaign, sizes), basis.demands, trials)
            if not np.all(np.isfinite(seen.factor)):
                break
            parts = _parts(basis, seen.factor, shared)
            if np.any(parts.ratio(np.zeros(size)) >= 1.0):
                break
            sizes = _settled(parts, rule)
        found.append(sizes)
    return Allocation(equal=found[0], least_cost=found[1], possible=True)


def resized(campaign: Campaign, factor: Array) -> Campaign:
    """The campaign with its sources at ``factor`` (S,) times their sizes; NaN leaves one as it is."""
    sources = tuple(
        scaled(source, float(f)) if np.isfinite(f) else source
        for source, f in zip(campaign.sources, factor, strict=True)
    )
    return replace(campaign, sources=sources)


def _parts(basis: Basis, factor: Array, shared: NDArray[np.bool_]) -> _Parts:
    """Terms of all declared sources, zero for those that stay as they are."""
    place = np.array([basis.names.index(s.name) for s in basis.campaign.sources], dtype=np.int64)
    stays = np.array([i not in place[shared] for i in range(len(basis.names))], dtype=np.bool_)
    return _Parts(
        variance=basis.variance[:, place] * shared,
        quartic=basis.quartic[:, place] * shared,
        fixed=basis.variance[:, stays].sum(axis=1),
        fixed_quartic=basis.quartic[:, stays].sum(axis=1),
        limit=basis.demands.limit / factor,
        level=basis.level,
    )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Parts:
    """Terms of the sources that are sized (D, S) and of those that stay (D,)."""

    variance: Array
    quartic: Array
    fixed: Array
    fixed_quartic: Array
    limit: Array
    level: float

    @property
    def counts(self) -> NDArray[np.bool_]:
        """(S,) sources that some demand depends on."""
        total = self.variance.sum(axis=1) + self.fixed
        return np.asarray(np.any(self.variance > NEGLIGIBLE * total[:, None], axis=0))

    def totals(self, factor: Array) -> tuple[Array, Array]:
        """V and Q of every demand (D,)."""
        return self.fixed + self.variance @ factor**2, self.fixed_quartic + self.quartic @ factor**4

    def ratio(self, factor: Array) -> Array:
        """U over limit (D,)."""
        return np.asarray(expanded_of(*self.totals(factor), self.level) / self.limit)

    def room(self, factor: Array) -> Array:
        """(D,) (limit/k)² less what stays, k at the sizes ``factor``."""
        variance, quartic = self.totals(factor)
        with np.errstate(divide="ignore", invalid="ignore"):
            dof = np.where(quartic > 0.0, variance**2 / quartic, np.inf)
        return np.asarray((self.limit / coverage_factor(dof, self.level)) ** 2 - self.fixed)


def _settled(parts: _Parts, share: Callable[[Array, Array], Array]) -> Array:
    """Factors (S,) of a rule that shares out a room, with the room's k at these very factors."""
    live = parts.counts
    if not np.any(live):
        return np.full(live.size, np.nan)
    factor = np.where(live, 1.0, 0.0)
    for _ in range(ROUNDS):
        room = np.maximum(parts.room(factor), 1e-300)
        new = np.zeros_like(factor)
        new[live] = share(parts.variance[:, live], room)
        if np.max(np.abs(new - factor)) <= 1e-9 * np.max(new):
            break
        factor = 0.5 * (factor + new)
    if share is _least_cost:
        factor[live] = _polished(parts, live, factor)
    factor = factor * _to_the_limit(parts, factor)
    return np.where(live, factor, np.nan)


def _polished(parts: _Parts, live: NDArray[np.bool_], factor: Array) -> Array:
    """The least cost with the very k of every trial point, from the geometric program's answer."""
    from scipy.optimize import minimize

    def full(x: Array) -> Array:
        out = np.zeros_like(factor)
        out[live] = np.exp(x)
        return out

    def cost(x: Array) -> tuple[float, Array]:
        return float(np.sum(np.exp(-x))), -np.exp(-x)

    start: Any = np.log(factor[live])
    limits: Any = {"type": "ineq", "fun": lambda x: 1.0 - parts.ratio(full(x))}
    options: Any = {"maxiter": 200, "ftol": 1e-13}
    found = minimize(cost, start, jac=True, constraints=limits, method="SLSQP", options=options)
    return np.exp(np.asarray(found.x, dtype=np.float64)) if found.success else factor[live]


def _to_the_limit(parts: _Parts, factor: Array) -> float:
    """The largest common multiple of the factors at which every target holds."""
    low, high = 0.0, 1.0
    while np.max(parts.ratio(high * factor)) < 1.0:
        low, high = high, 2.0 * high
    for _ in range(80):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if np.max(parts.ratio(middle * factor)) <= 1.0 else (low, middle)
    return low


def _equal(variance: Array, room: Array) -> Array:
    return np.asarray(1.0 / np.sqrt(variance.shape[1] * np.max(variance / room[:, None], axis=0)))


def _least_cost(variance: Array, room: Array) -> Array:
    """The geometric program: Σ exp(−x) smallest with Σ_s v/B exp(2 x_s) ≤ 1 at every demand, x = log f."""
    from scipy.optimize import minimize

    part = variance / room[:, None]

    def cost(x: Array) -> tuple[float, Array]:
        return float(np.sum(np.exp(-x))), -np.exp(-x)

    room_left = {
        "type": "ineq",
        "fun": lambda x: 1.0 - part @ np.exp(2.0 * x),
        "jac": lambda x: -2.0 * part * np.exp(2.0 * x),
    }
    options: Any = {"maxiter": 500, "ftol": 1e-13}
    start: Any = np.log(_equal(variance, room))
    limits: Any = room_left
    found = minimize(cost, start, jac=True, constraints=limits, method="SLSQP", options=options)
    return np.exp(np.asarray(found.x, dtype=np.float64))
