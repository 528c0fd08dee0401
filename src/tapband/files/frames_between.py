"""Answers between points as tables: differences, fits, repeats, regions, decisions. Angles in degrees."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from tapband.probability.series import SeriesMean
from tapband.questions.compare import ROUNDING, Differences
from tapband.questions.decide import Decision
from tapband.questions.fit import SHOWN, Fits
from tapband.questions.fit_plan import QUANTITIES
from tapband.questions.latents import Latents
from tapband.questions.law import Drawn
from tapband.questions.regions import Region
from tapband.questions.repeats import Repeats

NAMED, SMALL = 3, 0.005
"""Sources named in a cell, and the share of variance below which none is."""
LEFT_OUT = "far from linear, and too many such fits to draw them all: ask for this one alone"


def differences(found: Differences, drawn: Drawn) -> pd.DataFrame:
    """One row a pair and coefficient; significance is that of the Monte Carlo interval where it differs."""
    size, m = found.value.shape

    def each(values: object) -> NDArray[np.object_]:
        return np.repeat(np.array(values, dtype=object), m)

    def flat(values: NDArray[Any]) -> NDArray[Any]:
        return values.reshape(-1)

    equal_significant = np.abs(found.equal_angle_value) > found.equal_angle_expanded
    known = np.isfinite(found.value)
    trusted = drawn.agrees(found.low, found.high, found.u) | ~np.isfinite(drawn.low)
    low, high = np.where(trusted, found.low, drawn.low), np.where(trusted, found.high, drawn.high)
    significant = (low > ROUNDING) | (high < -ROUNDING)
    frame = pd.DataFrame(
        {
            "a": each(found.a),
            "b": each(found.b),
            "coefficient": np.tile(np.array(found.outputs, dtype=object), size),
            "difference": flat(found.value),
            "u": flat(found.u),
            "U": flat(found.U),
            "k": flat(found.k),
            "low": flat(found.low),
            "high": flat(found.high),
            "u_if_independent": flat(found.u_independent),
            "significant": flat(_yes(significant, known)),
            "dof": flat(np.where(np.isinf(found.dof), np.nan, found.dof)),
            "mc_low": flat(drawn.low),
            "mc_high": flat(drawn.high),
            "agrees": flat(_yes(trusted, known & np.isfinite(drawn.low))),
            "alpha_a": np.repeat(np.degrees(found.alpha[:, 0]), m),
            "alpha_b": np.repeat(np.degrees(found.alpha[:, 1]), m),
            "mach_a": np.repeat(found.mach[:, 0], m),
            "mach_b": np.repeat(found.mach[:, 1], m),
            "interpolated": np.repeat(np.where(found.interpolated, "yes", "no").astype(object), m),
            "equal_angle": flat(found.equal_angle_value),
            "equal_angle_u": flat(found.equal_angle_u),
            "equal_angle_U": flat(found.equal_angle_expanded),
            "equal_angle_significant": flat(
                _yes(equal_significant, known & np.isfinite(found.equal_angle_expanded))
            ),
            "remaining": [_remaining(found, r, j) for r in range(size) for j in range(m)],
        }
    )
    frame.attrs["notes"] = list(found.notes)
    frame.attrs["units"] = {"alpha_a": "deg", "alpha_b": "deg"}
    return frame


def _yes(flag: NDArray[np.bool_], known: NDArray[np.bool_]) -> NDArray[np.object_]:
    return np.where(known, np.where(flag, "yes", "no").astype(object), "")


def _remaining(found: Differences, r: int, j: int) -> str:
    """The largest sources that do not cancel, with their shares of the variance."""
    total = found.u[r, j] ** 2
    if not total > 0.0:
        return ""
    share = found.variance[r, j] / total
    largest = [s for s in np.argsort(-share, kind="stable")[:NAMED] if share[s] >= SMALL]
    return ", ".join(f"{found.sources[s]} {100 * share[s]:.0f}%" for s in largest)


def fits(found: Fits, drawn: Drawn) -> pd.DataFrame:
    """One row a polar and quantity; a quantity that a polar does not give has its note alone."""
    rows, columns = len(found.plans), [QUANTITIES.index(name) for name in SHOWN]
    low, high = found.value - found.U, found.value + found.U
    agrees = drawn.agrees(low, high, found.u)

    def each(values: list[object]) -> NDArray[np.object_]:
        return np.repeat(np.array(values, dtype=object), len(columns))

    def flat(values: NDArray[Any]) -> NDArray[Any]:
        return values[:, columns].reshape(-1)

    return pd.DataFrame(
        {
            "run": each([plan.polar.run for plan in found.plans]),
            "config": each([plan.polar.config for plan in found.plans]),
            "quantity": np.tile(np.array(SHOWN, dtype=object), rows),
            "value": flat(found.value),
            "u": flat(found.u),
            "U": flat(found.U),
            "k": flat(found.k),
            "low": flat(low),
            "high": flat(high),
            "points_used": flat(found.used),
            "note": flat(_with_left_out(found, drawn)),
            "dof": flat(np.where(np.isinf(found.dof), np.nan, found.dof)),
            "mach": each([plan.polar.mach for plan in found.plans]).astype(float),
            "mc_low": flat(drawn.low),
            "mc_high": flat(drawn.high),
            "agrees": flat(_yes(agrees, np.isfinite(drawn.low))),
        }
    )


def _with_left_out(found: Fits, drawn: Drawn) -> NDArray[np.object_]:
    """Notes (R, 8), with those of quantities that were too many to draw and too far from linear not to be."""
    notes = np.array(found.notes, dtype=object)
    if np.isfinite(drawn.low).any():
        missing = np.isfinite(found.value) & (found.u > 0.0) & ~np.isfinite(drawn.low)
        notes[missing] += f"; {LEFT_OUT}"
    return notes


def repeats(found: Sequence[Repeats], latents: Latents) -> pd.DataFrame:
    """One row a repeated angle and coefficient; alpha missing where all angles are judged together."""
    return pd.DataFrame(
        {
            "config": _texts(one.config for one in found),
            "alpha": np.degrees([one.alpha for one in found]),
            "coefficient": _texts(one.coefficient for one in found),
            "n": [len(one.points) for one in found],
            "scatter": [one.scatter for one in found],
            "predicted": [one.predicted for one in found],
            "dof": [one.dof for one in found],
            "chi2": [one.chi2 for one in found],
            "p": [one.p for one in found],
            "verdict": _texts(one.verdict for one in found),
            "within_run": [one.within for one in found],
            "within_run_dof": [one.within_dof for one in found],
            "between_runs": [one.between for one in found],
            "between_runs_dof": [one.between_dof for one in found],
            "points": _texts(_listed(one.points, latents) for one in found),
            "changing": _texts(", ".join(one.sources) for one in found),
            "at_one_angle": _texts("yes" if one.moved else "no" for one in found),
        }
    )


def regions(found: Sequence[Region], latents: Latents) -> pd.DataFrame:
    """One row a point and pair of coefficients."""
    axes = np.array([one.axes for one in found]).reshape(-1, 3)
    return pd.DataFrame(
        {
            "point": _texts(latents.names[one.point] for one in found),
            "run": _texts(latents.runs[one.point] for one in found),
            "a": _texts(one.a for one in found),
            "b": _texts(one.b for one in found),
            "k": [one.k for one in found],
            "semi_major": axes[:, 0],
            "semi_minor": axes[:, 1],
            "tilt": axes[:, 2],
            "method": _texts(one.method for one in found),
            "centre_a": [one.centre[0] for one in found],
            "centre_b": [one.centre[1] for one in found],
        }
    )


def decisions(found: Sequence[Decision], latents: Latents) -> pd.DataFrame:
    """One row a point and limit; an end that is not limited is missing."""

    def end(value: float) -> float:
        return value if np.isfinite(value) else np.nan

    return pd.DataFrame(
        {
            "point": _texts(latents.names[one.point] for one in found),
            "coefficient": _texts(one.coefficient for one in found),
            "value": [one.value for one in found],
            "U": [one.expanded for one in found],
            "lower": [end(one.lower) for one in found],
            "upper": [end(one.upper) for one in found],
            "probability": [one.probability for one in found],
            "rule": _texts(one.rule for one in found),
            "answer": _texts(one.answer for one in found),
            "run": _texts(latents.runs[one.point] for one in found),
            "alpha": np.degrees([latents.alpha[one.point] for one in found]),
        }
    )


def _texts(values: Iterable[str]) -> NDArray[np.object_]:
    return np.array(list(values), dtype=object)


def _listed(points: Sequence[int], latents: Latents) -> str:
    names = [latents.keys[i] for i in points]
    return ", ".join(names[:8]) + (f" and {len(names) - 8} more" if len(names) > 8 else "")


def samples(found: Sequence[SeriesMean | None], latents: Latents) -> pd.DataFrame:
    """One row a point with several samples and coefficient: what the series is worth.

    ``time_scale`` in samples; ``drift`` along the record, ``drift_p`` its probability by chance.
    """
    outputs = latents.outputs
    kept = [(p, one) for p, one in enumerate(found) if one is not None]

    def each(values: Iterable[object]) -> NDArray[np.object_]:
        return np.repeat(np.array(list(values), dtype=object), len(outputs))

    return pd.DataFrame(
        {
            "point": each(latents.names[p] for p, _ in kept),
            "run": each(latents.runs[p] for p, _ in kept),
            "coefficient": np.tile(np.array(outputs, dtype=object), len(kept)),
            "samples": each(one.samples for _, one in kept).astype(int),
            "effective": np.concatenate([one.effective for _, one in kept]),
            "time_scale": np.concatenate([one.time_scale for _, one in kept]),
            "batches": each(one.batches for _, one in kept).astype(int),
            "u": np.concatenate([np.sqrt(np.diag(one.covariance)) for _, one in kept]),
            "drift": np.concatenate([one.drift for _, one in kept]),
            "drift_p": np.concatenate([one.drift_p for _, one in kept]),
            "short": each("yes" if one.short else "no" for _, one in kept),
        }
    )
