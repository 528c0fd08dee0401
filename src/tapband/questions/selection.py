"""The cheapest options that meet every target, exactly; and every efficient trade of cost against interval.

With independent sources both totals that decide an interval are linear in the binary choice x of options:
the variance V = Σ v x and, for Welch and Satterthwaite, Q = Σ (v²/ν) x, with U = k(V²/Q) √V. As k is never
below its value z at infinite ν, z √V ≤ limit is a linear relaxation, solved by integer programming. Where
its optimum fails for want of degrees of freedom it is cut off: by a line above the feasible set of (V, Q)
where one separates it, and always by itself. The first optimum that holds is the optimum.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from tapband.questions.catalogue import Catalogue
from tapband.questions.freedom import separating_line, z_of
from tapband.questions.targets import ROUNDING

Array = NDArray[np.float64]
Chosen = tuple[int, ...]

ROUNDS = 5000
"""Cuts after which a search gives up; each removes at least one choice."""
MOST = 400
"""Efficient sets after which a frontier ends."""
SAME = 1e-7
"""Relative difference of costs or ratios below which they are equal."""


class SearchError(RuntimeError):
    """The search did not end: a fault of this program or of its solver, not of the campaign."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Efficient:
    """A choice that nothing cheaper beats: its options, one a slot, their cost and the worst ratio."""

    chosen: Chosen
    cost: float
    worst: float


@dataclass(slots=True, kw_only=True)
class Search:
    """The integer program of one catalogue and the cuts found so far, which stay valid as ratios fall."""

    catalogue: Catalogue
    rows: list[Array] = field(default_factory=list)
    upper: list[float] = field(default_factory=list)

    def cheapest(self, ratio: float = 1.0) -> Efficient | None:
        """The cheapest choice whose worst ratio is at most ``ratio``, and the best of that cost; None: none."""
        for _ in range(ROUNDS):
            chosen = self._solve(ratio)
            if chosen is None:
                return None
            if self.catalogue.worst(chosen) <= ratio * (1.0 + ROUNDING):
                return self._best_of_its_cost(chosen)
            self._cut(chosen, ratio)
        raise SearchError("the search for options did not end")

    def smallest(self) -> Efficient | None:
        """The choice of the smallest worst ratio whatever it costs; the cheapest such. None: a slot is empty."""
        start = self._solve(np.inf)
        return None if start is None else self._best_of_its_cost(start, free=True)

    def forbid(self, chosen: Chosen) -> None:
        """Leave one choice out from now on."""
        row = np.zeros(self.catalogue.cost.size)
        row[list(chosen)] = 1.0
        self.rows.append(row)
        self.upper.append(len(chosen) - 1.0)

    def _best_of_its_cost(self, chosen: Chosen, *, free: bool = False) -> Efficient:
        """The smallest worst ratio among choices that cost no more (``free``: among all)."""
        catalogue = self.catalogue
        most = np.inf if free else catalogue.price(chosen) * (1.0 + SAME)
        best, worst = chosen, catalogue.worst(chosen)
        local = Search(catalogue=catalogue, rows=list(self.rows), upper=list(self.upper))
        for _ in range(ROUNDS):
            local.forbid(chosen)
            found = local._solve(worst * (1.0 - SAME), most=most, level_out=True)
            if found is None or local._bound(found) >= worst * (1.0 - SAME):
                return Efficient(chosen=best, cost=catalogue.price(best), worst=worst)
            chosen = found
            if catalogue.worst(chosen) < worst:
                best, worst = chosen, catalogue.worst(chosen)
        raise SearchError("the search for the best options of one cost did not end")

    def _bound(self, chosen: Chosen) -> float:
        """The worst ratio were all degrees of freedom infinite."""
        catalogue = self.catalogue
        variance = catalogue.fixed + catalogue.variance[list(chosen)].sum(axis=0)
        return float(np.max(z_of(catalogue.level) * np.sqrt(variance) / catalogue.limit, initial=0.0))

    def _cut(self, chosen: Chosen, ratio: float) -> None:
        """Cut off a choice that passes the relaxation and fails the targets."""
        catalogue, index = self.catalogue, list(chosen)
        self.forbid(chosen)
        scale = (ratio * catalogue.limit / z_of(catalogue.level)) ** 2
        v = (catalogue.fixed + catalogue.variance[index].sum(axis=0)) / scale
        q = (catalogue.fixed_quartic + catalogue.quartic[index].sum(axis=0)) / scale**2
        for d in np.flatnonzero(catalogue.ratio(chosen) > ratio * (1.0 + ROUNDING)):
            line = separating_line(float(v[d]), float(q[d]), catalogue.level)
            if line is not None:
                slope, height = line
                self.rows.append(
                    catalogue.quartic[:, d] / scale[d] ** 2 - slope * catalogue.variance[:, d] / scale[d]
                )
                constant = catalogue.fixed_quartic[d] / scale[d] ** 2 - slope * catalogue.fixed[d] / scale[d]
                self.upper.append(height - constant)

    def _solve(self, ratio: float, *, most: float = np.inf, level_out: bool = False) -> Chosen | None:
        """An optimum of the relaxation: of cost, or (``level_out``) of the worst ratio; None: infeasible."""
        from scipy.optimize import Bounds, LinearConstraint, milp

        catalogue = self.catalogue
        options, slots = catalogue.cost.size, catalogue.slots
        if any(not np.any(catalogue.eligible[catalogue.slot == slot]) for slot in range(slots)):
            return None
        rows, upper = self._demands(ratio, level_out)
        width = options + 1
        extra = np.array([np.append(row, 0.0) for row in self.rows]).reshape(-1, width)
        price = np.append(_in_units(catalogue.cost), 0.0)
        matrix, limit = np.vstack([rows, extra]), np.append(upper, self.upper)
        if np.isfinite(most):
            matrix = np.vstack([matrix, price])
            limit = np.append(limit, most * price.max() / max(catalogue.cost.max(), 1e-300))
        each = np.zeros((slots, width))
        each[catalogue.slot, np.arange(options)] = 1.0
        result = milp(
            c=np.append(np.zeros(options), 1.0) if level_out else price,
            integrality=np.append(np.ones(options), 0.0),
            bounds=Bounds(np.zeros(width), np.append(catalogue.eligible.astype(np.float64), np.inf)),
            constraints=[LinearConstraint(matrix, -np.inf, limit), LinearConstraint(each, 1.0, 1.0)],
            options={"mip_rel_gap": 0.0},
        )
        if result.status == 2:
            return None
        if result.x is None or result.status != 0:
            raise SearchError(f"the integer programme was not solved: {result.message}")
        taken = result.x[:options]
        return tuple(int(np.argmax(np.where(catalogue.slot == slot, taken, -1.0))) for slot in range(slots))

    def _demands(self, ratio: float, level_out: bool) -> tuple[Array, Array]:
        """Rows (D, J + 1) and upper ends (D,): variances over the largest wanted; the last column is the slack
        that is minimised to level the worst ratio."""
        catalogue = self.catalogue
        if not np.isfinite(ratio):
            return np.empty((0, catalogue.cost.size + 1)), np.empty(0)
        scale = (ratio * catalogue.limit / z_of(catalogue.level)) ** 2
        rows = np.column_stack(
            [(catalogue.variance / scale).T, np.full(scale.size, -1.0 if level_out else 0.0)]
        )
        upper = (0.0 if level_out else 1.0 + 2.0 * ROUNDING) - catalogue.fixed / scale
        return rows, upper


def _in_units(cost: Array) -> Array:
    """Costs scaled so that the solver's absolute tolerance of 1e-6 is far below any difference that counts."""
    largest = float(np.max(cost, initial=0.0))
    return cost * (1e4 / largest) if largest > 0.0 else cost


def frontier(
    search: Search, progress: Callable[[int, int], None] | None = None, most: int = MOST
) -> tuple[tuple[Efficient, ...], bool]:
    """All efficient choices from the cheapest to the best, and whether the list is complete.

    Each is the cheapest of its worst ratio and the best of its cost; ``most`` ends the list.
    """
    found: list[Efficient] = []
    ratio = np.inf
    while len(found) < most:
        one = search.cheapest(ratio)
        if one is None:
            return tuple(found), True
        found.append(one)
        if progress is not None:
            progress(len(found), len(found) + 1)
        ratio = one.worst * (1.0 - SAME)
    return tuple(found), False
