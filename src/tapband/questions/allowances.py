"""How large each declared source may become, all others as declared, before a target fails.

The linearised answer is a closed form in k, which depends on the answer through the degrees of freedom: the
largest root is found on a grid and by bisection. Where Monte Carlo does not confirm the linearised interval
there, its own is the headline one, and the root of that is sought between sizes that hold and that fail.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.campaign import Campaign
from tapband.nouns.source import Source
from tapband.questions.basis import Basis, Terms, expanded_of
from tapband.questions.confirm import FAR, Confirmed, confirm, confirm_far
from tapband.questions.freedom import z_of
from tapband.questions.sizes import scaled, stated_size, unit_sized
from tapband.questions.targets import ROUNDING, Demands

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
Progress = Callable[[int, int], None]

GRID = 400
ROUNDS = 16
NEGLIGIBLE = 1e-20
"""Share of the variance below which a source moves a coefficient by rounding alone."""
STRAIGHT = 0.9
"""Linearised part of the target at an allowance, below which curvature makes the rest."""
FAR_OFF = 1.3
"""Ratio past which the linearised answer is no guide to the next size."""
NEAR = 0.002
"""Distance from the target, relative, at which an allowance is left as it is."""
WATCHED = 2
"""Demands, the nearest to their targets, that Monte Carlo looks at while an allowance is confirmed."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Allowance:
    """The largest size of one source: standard uncertainties ``declared`` and ``allowed`` in ``unit``.

    ``allowed`` is None where even zero fails, inf where no target depends on the source; ``factor`` is
    allowed over declared (inf where zero is declared). ``demand`` is the index of what binds, None where
    nothing does.
    """

    source: str
    declared: float
    allowed: float | None
    unit: str
    factor: float | None
    demand: int | None
    reason: str
    straight: bool
    """Whether the linearised interval still tells the size of the error there: not so where a coefficient first
    answers to the square of an error."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Sum:
    """One source among all: its own terms at size 1, those of all others, against limits (D,)."""

    rest: Terms
    own: Terms
    limit: Array
    level: float

    def ratio(self, size: Array | float) -> Array:
        """U over its limit (…, D) at sizes (…)."""
        f = np.asarray(size, dtype=np.float64)[..., None]
        variance = self.rest.variance + f**2 * self.own.variance
        quartic = self.rest.quartic + f**4 * self.own.quartic
        return np.asarray(expanded_of(variance, quartic, self.level) / self.limit)

    def largest(self, factor: Array | float = 1.0) -> tuple[float | None, int]:
        """The largest size at which every ratio times ``factor`` (D,) holds, and the demand that binds.

        None where no size holds; inf where the source moves none of the demands.
        """
        moved = self.own.variance > NEGLIGIBLE * self.rest.variance
        room = (self.limit / factor / z_of(self.level)) ** 2 - self.rest.variance
        most = np.sqrt(np.min(np.maximum(room[moved], 0.0) / self.own.variance[moved], initial=np.inf))
        if not np.isfinite(most):
            holds = bool(np.all(self.ratio(0.0) * factor <= 1.0 + ROUNDING))
            return (np.inf if holds else None), int(np.argmax(self.ratio(0.0) * factor))
        # k is at least z, so that no size above ``most`` holds.
        grid = np.linspace(0.0, most, GRID + 1)
        worst = np.max(self.ratio(grid) * factor, axis=1)
        holding = np.flatnonzero(worst <= 1.0 + ROUNDING)
        if not holding.size:
            return None, int(np.argmax(self.ratio(0.0) * factor))
        low = float(grid[holding[-1]])
        high = float(grid[min(holding[-1] + 1, GRID)])
        for _ in range(60):
            middle = 0.5 * (low + high)
            holds = bool(np.max(self.ratio(middle) * factor) <= 1.0)
            low, high = (middle, high) if holds else (low, middle)
        return low, int(np.argmax(self.ratio(low) * factor))


def allowances(
    basis: Basis, declared: Confirmed, trials: str | None = None, progress: Progress | None = None
) -> tuple[Allowance, ...]:
    """One a declared source. ``declared`` are both intervals of every demand as declared."""
    found = []
    sources = basis.campaign.sources
    for i, source in enumerate(sources):
        found.append(_allowance(basis, source, declared, trials))
        if progress is not None:
            progress(i + 1, len(sources))
    return tuple(found)


def _allowance(basis: Basis, source: Source, declared: Confirmed, trials: str | None) -> Allowance:
    standard, unit = stated_size(source, basis)
    probe = source if standard > 0.0 else unit_sized(source)
    each = stated_size(probe, basis)[0]
    others = np.array([name != source.name for name in basis.names])
    rest = (basis.variance[:, others].sum(axis=1), basis.quartic[:, others].sum(axis=1))
    one = Sum(
        rest=Terms(variance=rest[0], quartic=rest[1]),
        own=basis.terms(probe),
        limit=basis.demands.limit,
        level=basis.level,
    )
    quest = _Quest(basis=basis, one=one, probe=probe, trials=trials, factor=_finite(declared.factor))
    size, demand = quest.run()
    reason = ""
    if size is None:
        reason = f"even without it U of {_named(basis, demand)} is {quest.ratio_at_zero:.4g} times its target"
    elif np.isinf(size):
        reason = "no target depends on it"
    return Allowance(
        source=source.name,
        declared=standard,
        allowed=None if size is None else size * each,
        unit=unit,
        factor=None if size is None else size if standard > 0.0 else np.inf,
        demand=None if size is not None and np.isinf(size) else demand,
        reason=reason,
        straight=size is not None and 0.0 < size < np.inf and float(np.max(one.ratio(size))) > STRAIGHT,
    )


def _named(basis: Basis, demand: int) -> str:
    name = basis.assembled.problem.outputs[basis.demands.output[demand]]
    return f"{name} at {basis.raw.keys[basis.demands.point[demand]]}"


def _finite(factor: Array) -> Array:
    return np.where(np.isfinite(factor), factor, 1.0)


@dataclass(slots=True, kw_only=True)
class _Quest:
    """The search for the size of one source at which the headline interval meets its target."""

    basis: Basis
    one: Sum
    probe: Source
    trials: str | None
    factor: Array
    """(D,) headline over linearised interval, as last seen at each demand."""
    ratio_at_zero: float = np.nan

    def run(self) -> tuple[float | None, int]:
        """The size and the demand that binds; None: even zero fails; inf: nothing depends on it."""
        size, demand = self.one.largest(self.factor)
        if size is None or size == 0.0:
            worst, demand = self._seen(0.0)
            self.ratio_at_zero = worst
            if worst > 1.0 + ROUNDING:
                return None, demand
            size = self.one.largest(self.factor)[0]
        if size is None:
            return 0.0, demand
        return (size, demand) if np.isinf(size) else self._refined(size, demand)

    def _seen(self, size: float) -> tuple[float, int]:
        """The worst headline ratio at a size, and its demand; the factors there are noted."""
        near = np.argsort(-self.one.ratio(size) * self.factor, kind="stable")[:WATCHED]
        moved = replacing(self.basis.campaign, scaled(self.probe, size))
        look = confirm_far if size > FAR else confirm
        seen = look(moved, _some(self.basis.demands, near), self.trials)
        known = np.isfinite(seen.headline)
        self.factor = self.factor.copy()
        self.factor[near[known]] = seen.factor[known]
        headline = np.where(known, seen.headline, np.inf) / self.one.limit[near]
        return float(np.max(headline)), int(near[np.argmax(headline)])

    def _refined(self, size: float, demand: int) -> tuple[float, int]:
        """The size at which the worst headline ratio is 1, between one that holds and one that fails."""
        holds, fails = (0.0, 0.0), (np.inf, np.inf)
        best = (0.0, demand)
        for _ in range(ROUNDS):
            worst, where = self._seen(size)
            if worst <= 1.0 + NEAR and size > best[0]:
                best = (size, where)
            if abs(worst - 1.0) <= NEAR:
                break
            if worst < 1.0:
                holds = max(holds, (size, worst))
            else:
                fails = min(fails, (size, worst))
            size = self._between(holds, fails)
            if fails[0] - holds[0] <= NEAR * holds[0]:
                break
        return best

    def _between(self, holds: tuple[float, float], fails: tuple[float, float]) -> float:
        """The next size to look at: the linearised root with the factors seen last, where that lies between."""
        wanted = self.one.largest(self.factor)[0]
        if np.isinf(fails[0]):
            return wanted if wanted is not None and wanted > holds[0] else 2.0 * holds[0]
        if holds[0] == 0.0:
            far = fails[1] > FAR_OFF or wanted is None or not wanted < fails[0]
            return fails[0] / min(fails[1], 1e3) if far or wanted is None else wanted
        # The ratio as a power of the size between the two.
        power = np.log(fails[1] / holds[1]) / np.log(fails[0] / holds[0])
        inside = float(holds[0] * holds[1] ** (-1.0 / power))
        middle = float(np.sqrt(holds[0] * fails[0]))
        if fails[0] > 4.0 * holds[0]:
            return middle
        low, high = holds[0] ** 0.95 * fails[0] ** 0.05, holds[0] ** 0.05 * fails[0] ** 0.95
        return float(min(max(inside, low), high))


def replacing(campaign: Campaign, source: Source) -> Campaign:
    """The campaign with the source in the place of the one of its name."""
    return replace(campaign, sources=tuple(source if s.name == source.name else s for s in campaign.sources))


def _some(demands: Demands, index: Indices) -> Demands:
    return Demands(
        target=demands.target[index],
        point=demands.point[index],
        output=demands.output[index],
        limit=demands.limit[index],
    )
