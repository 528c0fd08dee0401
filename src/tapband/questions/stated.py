"""Coefficients at the stated condition: moved from the measured to the nominal angle and Mach number.

C_stated = C + a (alpha_nominal − alpha) + b (M_nominal − M), a and b the local slopes of the polar. Errors of
alpha and M enter as slope times error, together with what the same errors do to C itself, and the slopes' own
uncertainty as two more sources. Set apart by name from the coefficients as measured.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.problem import Draws, Family
from tapband.nouns.symbols import MEASURED
from tapband.probability.coverage import agreement
from tapband.probability.linearised import Linearised, propagate
from tapband.probability.montecarlo import MonteCarlo, run
from tapband.questions.latents import Latents, latents_at
from tapband.questions.local_slopes import LocalSlopes, local_slopes
from tapband.reduction import Reduced
from tapband.reduction.assemble import Assembled
from tapband.reduction.problem import CampaignProblem

Array = NDArray[np.float64]
STATED = tuple(f"{name}_stated" for name in MEASURED)
SLOPES = ("local slope in angle", "local slope in Mach number")
"""Names of the sources that the slopes add."""
COUNT = len(MEASURED)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class StatedProblem:
    """The coefficients at the stated condition as a :class:`tapband.nouns.problem.Problem`.

    Points without a nominal condition, or without a slope to move along, have NaN.
    """

    base: CampaignProblem
    families: Sequence[Family]
    estimate: Array
    sensitivity: Sequence[Array]
    slopes: LocalSlopes
    steps: Array
    """(P, 2) nominal less measured angle [rad] and Mach number; zero where no nominal is given."""
    on_alpha: Mapping[int, Array]
    on_mach: Mapping[int, Array]
    moves_alpha: NDArray[np.bool_]
    """(P,) points with a nominal angle."""
    moves_mach: NDArray[np.bool_]

    @property
    def outputs(self) -> tuple[str, ...]:
        """Their names."""
        return STATED

    @property
    def affine(self) -> NDArray[np.bool_]:
        """As the coefficients measured: what is added is linear in every latent."""
        return self.base.affine[:COUNT]

    def part(self, points: slice) -> StatedProblem:
        """The problem of a block of points alone."""
        return replace(
            self,
            base=self.base.part(points),
            families=[_family_part(family, points) for family in self.families],
            estimate=self.estimate[points],
            sensitivity=[s[points] for s in self.sensitivity],
            slopes=self.slopes.part(points),
            steps=self.steps[points],
            on_alpha={s: part[points] for s, part in self.on_alpha.items()},
            on_mach={s: part[points] for s, part in self.on_mach.items()},
            moves_alpha=self.moves_alpha[points],
            moves_mach=self.moves_mach[points],
        )

    def evaluate(self, points: slice, draws: Draws) -> Array:
        """y (Pb, T, 5); see :class:`Problem`."""
        inner = {f: xi for f, xi in draws.items() if f < len(self.base.loaded)}
        y = self.base.evaluate(points, inner or self._nothing(draws))[..., :COUNT]
        return np.asarray(y + self.added(points, draws))

    def given(self, points: slice, draws: Draws, out: Sequence[int]) -> tuple[Array, Mapping[int, Array]]:
        """As :meth:`evaluate`, and the variances that linear families add; see :class:`Problem`."""
        size = len(self.base.loaded)
        inner = {f: xi for f, xi in draws.items() if f < size}
        y, variance = self.base.given(points, inner or self._nothing(draws), [f for f in out if f < size])
        result = {f: v[..., :COUNT] for f, v in variance.items()}
        for f in out:
            if f >= size:
                own = np.sum(self.sensitivity[f][points] ** 2, axis=2)[:, None, :]
                result[f] = np.broadcast_to(own, y[..., :COUNT].shape)
        return np.asarray(y[..., :COUNT] + self.added(points, draws)), result

    def _nothing(self, draws: Draws) -> Draws:
        """The first family at zero, so that the number of trials is known where none of its own is drawn."""
        trials = max((xi.shape[1] for xi in draws.values()), default=1)
        return {0: np.zeros((1, trials, len(self.base.families[0].members)))}

    def added(self, points: slice, draws: Draws) -> Array:
        """What moving to the stated condition adds (Pb, T, 5)."""
        a, b = self.slopes.alpha[points], self.slopes.mach[points]
        step = self.steps[points]
        total = (a * step[:, :1] + b * step[:, 1:])[:, None, :]
        for slope, moves, of in ((a, self.moves_alpha, self.on_alpha), (b, self.moves_mach, self.on_mach)):
            rate = np.where(moves[points][:, None], slope, 0.0)
            for s, part in of.items():
                if s in draws:
                    moved = np.matmul(draws[s], part[points][:, :, None])
                    total = total - rate[:, None, :] * moved
        for f in range(len(self.base.loaded), len(self.families)):
            if f in draws:
                total = total + np.matmul(draws[f], np.swapaxes(self.sensitivity[f][points], 1, 2))
        return np.asarray(total)


def stated_problem(assembled: Assembled, latents: Latents) -> StatedProblem | None:
    """The problem of the stated condition; None where no point has a nominal one."""
    points = assembled.points
    alpha, mach = _nominal(points.nominal_alpha, points.alpha), _nominal(points.nominal_mach, latents.mach)
    if alpha is None and mach is None:
        return None
    size = len(points.names)
    wanted = [np.full(size, np.nan) if each is None else each for each in (alpha, mach)]
    steps = np.stack([wanted[0] - points.alpha, wanted[1] - latents.mach], axis=1)
    moves = np.isfinite(steps)
    slopes = local_slopes(latents, assembled.campaign.plan.polar.same_angle)
    safe = np.where(moves, steps, 0.0)
    measured = latents.estimate[:, :COUNT]
    estimate = measured + np.where(moves[:, :1], slopes.alpha * safe[:, :1], 0.0)
    estimate = estimate + np.where(moves[:, 1:], slopes.mach * safe[:, 1:], 0.0)
    estimate[~moves.any(axis=1)] = np.nan
    extra = [
        _slope_load(slopes.alpha_u, safe[:, 0], moves[:, 0]),
        _slope_load(slopes.mach_u, safe[:, 1], moves[:, 1]),
    ]
    return StatedProblem(
        base=assembled.problem,
        families=[*assembled.problem.families, *_slope_families(size)],
        estimate=estimate,
        sensitivity=[*_moved(latents, slopes, moves), *extra],
        slopes=replace(slopes, alpha=np.nan_to_num(slopes.alpha), mach=np.nan_to_num(slopes.mach)),
        steps=safe,
        on_alpha=latents.on_alpha,
        on_mach=latents.on_mach,
        moves_alpha=moves[:, 0],
        moves_mach=moves[:, 1],
    )


def _nominal(values: Array | None, measured: Array) -> Array | None:
    return None if values is None or not np.any(np.isfinite(values)) else np.asarray(values + 0.0 * measured)


def _moved(latents: Latents, slopes: LocalSlopes, moves: NDArray[np.bool_]) -> list[Array]:
    """Sensitivities (P, 5, G) of the stated coefficients to the campaign's sources."""
    rates = [
        np.where(moves[:, [i]], np.nan_to_num(slope), 0.0)
        for i, slope in enumerate((slopes.alpha, slopes.mach))
    ]
    found = []
    for s, own in enumerate(latents.sensitivity):
        total = own[:, :COUNT].copy()
        for rate, of in zip(rates, (latents.on_alpha, latents.on_mach), strict=True):
            if s in of:
                total -= rate[:, :, None] * of[s][:, None, :]
        found.append(total)
    return found


def _slope_load(u: Array, step: Array, moves: NDArray[np.bool_]) -> Array:
    """(P, 5, 5) a latent a coefficient: step times the standard uncertainty of its slope."""
    size = np.where(moves[:, None], np.nan_to_num(u) * np.abs(step)[:, None], 0.0)
    return np.asarray(size[:, :, None] * np.eye(COUNT))


def _slope_families(size: int) -> list[Family]:
    return [
        Family(
            source=name,
            members=MEASURED,
            point_group=("",) * size,
            scale_group=("",) * size,
            dof=np.full(size, np.inf),
            linear=True,
        )
        for name in SLOPES
    ]


def _family_part(family: Family, points: slice) -> Family:
    return replace(
        family,
        point_group=family.point_group[points],
        scale_group=family.scale_group[points],
        dof=family.dof[points],
    )


def full_latents(assembled: Assembled) -> Latents:
    """The latents of the coefficients as measured, at the reference Mach number, at the stated condition."""
    latents = latents_at(assembled)
    problem = stated_problem(assembled, latents)
    return latents if problem is None else with_stated(latents, problem)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Together:
    """The coefficients of a campaign with the stated ones behind them, to be evaluated together."""

    stated: StatedProblem

    @property
    def families(self) -> Sequence[Family]:
        """The campaign's sources, then the slopes."""
        return self.stated.families

    def evaluate(self, points: slice, draws: Draws) -> Array:
        """y (Pb, T, m + 5)."""
        inner = {f: xi for f, xi in draws.items() if f < len(self.stated.base.loaded)}
        y = self.stated.base.evaluate(points, inner)
        moved = y[..., :COUNT] + self.stated.added(points, draws)
        return np.concatenate([np.broadcast_to(y, (*moved.shape[:-1], y.shape[-1])), moved], axis=-1)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Stated:
    """The stated coefficients by both propagators, and the parts (P, 5) that the conditions add alone."""

    problem: StatedProblem
    linear: Linearised
    montecarlo: MonteCarlo
    agrees: NDArray[np.bool_]
    from_alpha: Array
    """|slope| · u(alpha), NaN where alpha is not moved."""
    from_mach: Array


def stated(reduced: Reduced, latents: Latents) -> Stated | None:
    """The stated coefficients of a reduced campaign; None where no point has a nominal condition."""
    problem = stated_problem(reduced.assembled, latents)
    if problem is None:
        return None
    intervals = reduced.campaign.intervals
    linear = propagate(problem, intervals.level)
    drawn = run(problem, intervals.level, intervals.trials, intervals.seed)
    alpha_u, mach_u = reduced.condition_u[:, 0], reduced.condition_u[:, 1]
    alone = [
        np.where(moves[:, None], np.abs(slope) * u[:, None], np.nan)
        for slope, moves, u in (
            (problem.slopes.alpha, problem.moves_alpha, alpha_u),
            (problem.slopes.mach, problem.moves_mach, mach_u),
        )
    ]
    return Stated(
        problem=problem,
        linear=linear,
        montecarlo=drawn,
        agrees=agreement(linear, drawn),
        from_alpha=alone[0],
        from_mach=alone[1],
    )


def with_stated(latents: Latents, problem: StatedProblem) -> Latents:
    """The latents with the stated coefficients behind the others."""
    size, m = latents.estimate.shape
    empty = np.zeros((size, m, COUNT))
    own = [*latents.sensitivity, empty, empty]
    zeros = np.zeros(size, dtype=np.int64)
    return replace(
        latents,
        outputs=(*latents.outputs, *STATED),
        sources=(*latents.sources, *SLOPES),
        estimate=np.concatenate([latents.estimate, problem.estimate], axis=1),
        sensitivity=tuple(
            np.concatenate([a, b], axis=1) for a, b in zip(own, problem.sensitivity, strict=True)
        ),
        group=(*latents.group, zeros, zeros),
        scale=(*latents.scale, zeros, zeros),
        dof=np.concatenate([latents.dof, np.full((2, size), np.inf)]),
        random=np.append(latents.random, [False, False]),
    )
