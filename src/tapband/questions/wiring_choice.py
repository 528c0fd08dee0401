"""Which taps to put on which module, so that what a module's taps share harms least.

A source shared by module adds, at demand d, Σ_g (Σ_{i in g} a_di)² to the variance, a_di the sensitivity of
the coefficient to that source at tap i. On a closed contour the sum over all taps vanishes for a common
error; a good wiring brings every module's own sum near zero, which interleaving along the contour nearly
does. Several plain wirings are improved by exchanging pairs of taps, and by moving taps to free ports, until no
such step helps; then the best of them is shaken and improved again. The answer is a good local optimum, found
the same way every time, and need not be the best there is.

D demands, F sources shared by module, n live taps, G modules.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.errors import QuestionError
from tapband.questions.basis import Basis, expanded_of
from tapband.reduction.loads import load

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
Progress = Callable[[int, int], None]

COLUMN = "module"
ROUNDS = 40
"""Steps a tap after which the search ends; it has ended long before."""
SHAKES, FEWEST_SHAKES, SHAKEN_PAIRS = 24, 4, 3
"""Times the best wiring is shaken (fewer where that is much work), and pairs of taps exchanged each time."""
LEAST = 1e-9
"""Smallest gain of a step."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Wired:
    """One wiring: its name, the module of each live tap (n,), and the worst ratio of U to target."""

    name: str
    module: Indices
    worst: float
    demand: int


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class WiringChoice:
    """Wirings compared, the one found last; ``taps`` are the live taps' places in the table (n,)."""

    modules: tuple[str, ...]
    taps: Indices
    wirings: tuple[Wired, ...]
    shared: tuple[str, ...]
    """Sources that the wiring acts on."""

    @property
    def found(self) -> Wired:
        """The best."""
        return self.wirings[-1]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Terms:
    """What is needed to judge a wiring."""

    tap: Array
    """(F, D, n) sensitivity to the module's error through each tap."""
    port: Array
    """(F, D, G) through stream channels that hang on a module."""
    nu: Array
    """(F, D)"""
    rest: Array
    """(D,) variance of all else, with :attr:`rest_quartic`."""
    rest_quartic: Array
    limit: Array
    level: float

    def sums(self, module: Indices) -> Array:
        """(F, D, G) sensitivity to each module's error."""
        member = np.zeros((module.size, self.port.shape[2]))
        member[np.arange(module.size), module] = 1.0
        return np.asarray(self.tap @ member + self.port)

    def ratio(self, squares: Array) -> Array:
        """(…, D) U over limit from the sums' squares over modules (…, F, D)."""
        total = self.rest + squares.sum(axis=-2)
        quartic = self.rest_quartic + (squares**2 / self.nu).sum(axis=-2)
        return np.asarray(expanded_of(total, quartic, self.level) / self.limit)


def wiring_choice(basis: Basis, progress: Progress | None = None) -> WiringChoice:
    """The best wiring found to the modules and ports of the campaign, beside plain ones."""
    wiring = basis.campaign.plan.wiring
    assert wiring is not None
    taps = _in_order(basis)
    modules = _module_names(basis, wiring.modules)
    free = _free_ports(basis, modules, wiring.ports)
    if taps.size > sum(free):
        raise QuestionError(
            f"wiring: {wiring.modules} modules of {wiring.ports} ports must hold the {taps.size} taps in use and the "
            f"stream channels on them; got room for {sum(free)} taps; add modules or ports"
        )
    shared, terms = _terms(basis, taps, modules)
    starts = _starts(basis, taps, modules, free)
    judged = [_judged(name, module, terms) for name, module in starts.items()]
    found = _judged("found", min(judged, key=lambda one: one.worst).module, terms)
    if shared:
        found = _sought(terms, [one.module for one in judged], found, free, progress)
    return WiringChoice(modules=modules, taps=taps, wirings=(*judged, found), shared=shared)


def _in_order(basis: Basis) -> Indices:
    """Taps in use, from the lower trailing edge round the nose to the upper one."""
    live = np.flatnonzero(basis.assembled.nominal.live.any(axis=0))
    return live[np.argsort(basis.assembled.s[live], kind="stable")].astype(np.int64)


def _module_names(basis: Basis, count: int) -> tuple[str, ...]:
    """Names of the modules: those of channels first, then those of taps, then new ones."""
    campaign = basis.campaign
    on_stream = [c.columns[COLUMN] for c in campaign.channels.values() if COLUMN in c.columns]
    known = list(dict.fromkeys([*on_stream, *(m for m in campaign.taps.columns.get(COLUMN, ()) if m)]))
    if len(set(on_stream)) > count:
        raise QuestionError(
            f"wiring.modules: stream channels hang on {len(set(on_stream))} modules; got {count}; write at least that"
        )
    new = (f"M{i + 1}" for i in range(10 * count + len(known)))
    known += [name for name in new if name not in known]
    return tuple(sorted(known[:count]))


def _free_ports(basis: Basis, modules: Sequence[str], ports: int) -> list[int]:
    """Ports of each module that stream channels leave free."""
    taken = [c.columns.get(COLUMN) for c in basis.campaign.channels.values()]
    return [ports - taken.count(name) for name in modules]


def _terms(basis: Basis, taps: Indices, modules: Sequence[str]) -> tuple[tuple[str, ...], _Terms]:
    sources = [s for s in basis.campaign.sources if s.across_taps.removeprefix("by ") == COLUMN]
    demands = basis.demands
    tap = np.zeros((len(sources), len(demands.limit), taps.size))
    port = np.zeros((len(sources), len(demands.limit), len(modules)))
    nu = np.full((len(sources), len(demands.limit)), np.inf)
    for f, source in enumerate(sources):
        loaded = load(source, basis.campaign, basis.raw, basis.assembled.nominal)
        nu[f] = loaded.nu[demands.point]
        for entry in loaded.entries:
            for at in basis.slopes:
                here = np.isin(demands.point, at.points)
                row = np.searchsorted(at.points, demands.point[here])
                out = demands.output[here]
                if entry.on_taps:
                    by_tap = getattr(at.slopes, entry.slot) * entry.load[at.points][:, None, :]
                    tap[f, here] += by_tap[row, out][:, taps]
                else:
                    name = loaded.family.members[int(entry.member[0])]
                    by = at.slopes.scalars[entry.slot] * entry.load[at.points][:, None]
                    if name in modules:
                        port[f, here, modules.index(name)] += by[row, out]
    names = tuple(s.name for s in sources)
    others = np.array([name not in names for name in basis.names])
    terms = _Terms(
        tap=tap, port=port, nu=nu, rest=basis.variance[:, others].sum(axis=1),
        rest_quartic=basis.quartic[:, others].sum(axis=1), limit=demands.limit, level=basis.level,
    )  # fmt: skip
    return names, terms


def _starts(basis: Basis, taps: Indices, modules: Sequence[str], free: Sequence[int]) -> dict[str, Indices]:
    """Plain wirings: as wired (where it fits), in blocks along the contour, surface by surface, interleaved."""
    count = len(modules)
    found: dict[str, Indices] = {}
    column = basis.campaign.taps.columns.get(COLUMN, ())
    present = [column[i] for i in taps] if column else []
    if present and all(name in modules for name in present):
        wired = np.array([modules.index(name) for name in present], dtype=np.int64)
        if all(int(np.sum(wired == g)) <= free[g] for g in range(count)):
            found["as wired"] = wired
    even = np.arange(taps.size) * count // taps.size
    found["blocks"] = _fitted(even, free)
    found["interleaved"] = _fitted(np.arange(taps.size) % count, free)
    there_and_back = np.concatenate([np.arange(count), np.arange(count)[::-1]])
    found["there and back"] = _fitted(there_and_back[np.arange(taps.size) % (2 * count)], free)
    return found


def _fitted(wanted: Indices, free: Sequence[int]) -> Indices:
    """The wiring with taps moved from full modules to the next with a free port."""
    left, module = list(free), np.empty(wanted.size, dtype=np.int64)
    for i, want in enumerate(wanted.tolist()):
        g = next(h % len(left) for h in range(want, want + len(left)) if left[h % len(left)] > 0)
        left[g] -= 1
        module[i] = g
    return module


def _judged(name: str, module: Indices, terms: _Terms) -> Wired:
    ratio = terms.ratio((terms.sums(module) ** 2).sum(axis=-1))
    return Wired(name=name, module=module, worst=float(np.max(ratio)), demand=int(np.argmax(ratio)))


def _sought(
    terms: _Terms, starts: Sequence[Indices], best: Wired, free: Sequence[int], progress: Progress | None
) -> Wired:
    """The best local optimum from plain wirings, then from the best so far with a few taps exchanged."""
    work = starts[0].size ** 2 * terms.tap.shape[0] * terms.tap.shape[1]
    shaken = int(np.clip(SHAKES * 1e5 / max(work, 1), FEWEST_SHAKES, SHAKES))
    generator = np.random.default_rng(0)
    for k in range(len(starts) + shaken):
        module = starts[k] if k < len(starts) else best.module.copy()
        if k >= len(starts):
            for _ in range(SHAKEN_PAIRS):
                i, j = generator.integers(0, module.size, 2)
                module[[i, j]] = module[[j, i]]
        one = _judged("found", _improved(terms, module, free), terms)
        if one.worst < best.worst:
            best = one
        if progress is not None:
            progress(k + 1, len(starts) + shaken)
    return best


def _improved(terms: _Terms, module: Indices, free: Sequence[int]) -> Indices:
    """The steepest exchange or move again and again, until none lowers the worst ratio.

    Among steps of one worst ratio (a target that no wiring helps) the mean of all ratios decides.
    """
    module = module.copy()
    sums = terms.sums(module)
    score = _score(terms.ratio((sums**2).sum(axis=-1)))
    for _ in range(ROUNDS * module.size):
        steps, after = _steps(terms, module, sums, free)
        if not len(steps):
            break
        best = int(np.lexsort((after[:, 1], np.round(after[:, 0], 12)))[0])
        lower = after[best, 0] < score[0] - LEAST
        level = after[best, 0] < score[0] + 1e-12 and after[best, 1] < score[1] - LEAST
        if not (lower or level):
            break
        i, j, g = steps[best].tolist()
        if j >= 0:
            module[[i, j]] = module[[j, i]]
        else:
            module[i] = g
        sums = terms.sums(module)
        score = (float(after[best, 0]), float(after[best, 1]))
    return module


def _score(ratio: Array) -> tuple[float, float]:
    return float(np.max(ratio)), float(np.mean(ratio))


def _steps(terms: _Terms, module: Indices, sums: Array, free: Sequence[int]) -> tuple[Indices, Array]:
    """Every exchange (i, j, −1) and move (i, −1, g), and the worst and mean ratio (K, 2) after each."""
    first, second = np.triu_indices(module.size, 1)
    apart = module[first] != module[second]
    pairs = np.column_stack([first[apart], second[apart], np.full(int(apart.sum()), -1)])
    used = np.bincount(module, minlength=len(free))
    open_ = [g for g in range(len(free)) if used[g] < free[g]]
    moves = np.array(
        [(i, -1, g) for g in open_ for i in range(module.size) if module[i] != g], dtype=np.int64
    )
    steps = np.vstack([pairs, moves.reshape(-1, 3)]).astype(np.int64)
    if not len(steps):
        return steps, np.empty((0, 2))
    squares = (sums**2).sum(axis=-1)
    i, j, g = steps.T
    to = np.where(j >= 0, module[np.maximum(j, 0)], g)
    shift = terms.tap[..., i] - np.where(j >= 0, terms.tap[..., np.maximum(j, 0)], 0.0)
    out, into = sums[..., module[i]], sums[..., to]
    change = (out - shift) ** 2 - out**2 + (into + shift) ** 2 - into**2
    ratio = terms.ratio(np.moveaxis(squares[..., None] + change, -1, 0))
    return steps, np.column_stack([ratio.max(axis=1), ratio.mean(axis=1)])
