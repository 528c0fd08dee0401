"""The search for tap places that make the true error small, on flows that are known exactly.

Unknown are the logarithms of the spacings between neighbouring taps in τ, smooth along the contour: a cubic
spline through K knots. On each flow the power mean over angles and coefficients of (rms error / target) is
taken relative to the better of the √x and the cosine layout, so that no flow drowns the others; the power
mean of that over flows is what falls. A layout made for one flow alone, or for the written interval, finds
zeros of the error that another flow does not have.

n taps, A angles, D flows.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from tapband.experiment.tap_flows import TapFlow
from tapband.questions.tap_errors import TapErrors, layout_errors

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
Progress = Callable[[int, int], None]

KNOTS = 16
ANGLES_POWER, FLOWS_POWER = 8.0, 6.0
"""Powers of the two means: high enough that the worst counts most, low enough to be smooth."""
WRITTEN = 0.15
"""Part of the spacing term's variance that counts as error, so that the written interval falls too."""
STEP = 1e-4
ROUGHNESS = 0.2
CROWDING = 20.0


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Judge:
    """What a layout is judged by: flows, tap errors, limits (A, 5; inf where no target) and references (D,)."""

    flows: tuple[TapFlow, ...]
    errors: TapErrors
    limit: Array
    reference: Array

    @classmethod
    def of(
        cls, flows: Sequence[TapFlow], errors: TapErrors, limit: Array, references: Sequence[Array]
    ) -> Judge:
        """A judge whose references are the better of the layouts ``references`` on each flow."""
        plain = cls(flows=tuple(flows), errors=errors, limit=limit, reference=np.ones(len(flows)))
        return cls(
            flows=plain.flows,
            errors=errors,
            limit=limit,
            reference=np.min([plain.each(tau) for tau in references], axis=0),
        )

    def ratios(self, flow: TapFlow, tau: Array) -> Array:
        """(A, 5) true rms error over target; zero where there is no target."""
        made = layout_errors(flow, self.errors, flow.s_of(tau))
        return np.asarray(np.sqrt(made.off**2 + made.variance) / self.limit)

    def blend(self, flow: TapFlow, tau: Array) -> Array:
        """(A, 5) as :meth:`ratios`, a part of the interval's spacing term added."""
        made = layout_errors(flow, self.errors, flow.s_of(tau))
        return np.asarray(np.sqrt(made.off**2 + made.variance + WRITTEN * made.spacing) / self.limit)

    def each(self, tau: Array) -> Array:
        """(D,) power means of the ratios on each flow, over its reference."""
        found = [_power_mean(self.blend(flow, tau), self.limit, ANGLES_POWER) for flow in self.flows]
        return np.asarray(np.array(found) / self.reference)

    def worst(self, tau: Array) -> float:
        """The largest ratio on the first flow, the section's own."""
        return float(np.max(self.ratios(self.flows[0], tau)))

    def score(self, tau: Array) -> float:
        """What the search makes small."""
        return float(np.mean(self.each(tau) ** FLOWS_POWER) ** (1.0 / FLOWS_POWER))


def _power_mean(ratio: Array, limit: Array, power: float) -> float:
    asked = np.isfinite(limit)
    top = float(ratio[asked].max())
    return top * float(np.mean((ratio[asked] / top) ** power)) ** (1.0 / power) if top > 0.0 else 1e-12


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Frame:
    """What a layout may not change: places τ that are taken, at these positions in the order of the taps."""

    count: int
    anchor: Array
    at: Indices
    """Rising; the first is 0 and the last ``count`` − 1."""

    def places(self, spacing: Array) -> Array:
        """τ (n,) from log spacings (n − 1,), scaled to fit between the taken places."""
        tau = np.empty(self.count)
        step = np.exp(spacing - np.max(spacing))
        for a, b, left, right in zip(
            self.at[:-1], self.at[1:], self.anchor[:-1], self.anchor[1:], strict=True
        ):
            part = np.cumsum(step[a:b])
            tau[a] = left
            tau[a + 1 : b + 1] = left + (right - left) * part / part[-1]
        tau[self.at] = self.anchor
        return tau

    def spacings(self, tau: Array) -> Array:
        """Log spacings (n − 1,) of a layout."""
        return np.asarray(np.log(np.maximum(np.diff(tau), 1e-6)))


def searched(
    judge: Judge,
    frame: Frame,
    start: Array,
    spacing: float,
    iterations: int,
    progress: Progress | None = None,
) -> Array:
    """τ (n,) of a good layout from a start τ (n,); ``spacing`` [chords] is the smallest along the own contour.

    The result keeps the smallest spacing nearly; the caller makes it exact.
    """
    from scipy.optimize import minimize

    basis = _smooth_basis(frame.count - 1)
    first = frame.spacings(start)
    knots = np.zeros(basis.shape[1])
    done = [0]

    def value(coefficient: Array) -> float:
        tau = frame.places(first + basis @ coefficient)
        gap = np.diff(judge.flows[0].s_of(tau))
        crowded = 0.0 if spacing <= 0.0 else float(np.sum(np.maximum(1.0 - gap / spacing, 0.0) ** 2))
        rough = ROUGHNESS * float(np.mean(np.diff(coefficient, 2) ** 2))
        return judge.score(tau) + rough + CROWDING * crowded

    def both(coefficient: Array) -> tuple[float, Array]:
        here = value(coefficient)
        slope = np.empty(coefficient.size)
        for i in range(coefficient.size):
            moved = coefficient.copy()
            moved[i] += STEP
            slope[i] = (value(moved) - here) / STEP
        done[0] += 1
        if progress is not None:
            progress(min(done[0], iterations), iterations)
        return here, slope

    found = minimize(
        both, knots, jac=True, method="L-BFGS-B", options={"maxiter": iterations, "maxfun": iterations}
    )
    return frame.places(first + basis @ np.asarray(found.x, dtype=np.float64))


def _smooth_basis(size: int) -> Array:
    """(size, K) values of natural cubic splines through K knots."""
    knots = min(KNOTS, size)
    return np.asarray(
        CubicSpline(np.linspace(0.0, 1.0, knots), np.eye(knots), bc_type="natural")(
            np.linspace(0.0, 1.0, size)
        )
    )
