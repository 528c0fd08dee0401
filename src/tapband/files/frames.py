"""Results as tables: the columns that leave the program, SI units, angles in degrees."""

from __future__ import annotations

from typing import Protocol

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from tapband.probability.linearised import Linearised
from tapband.probability.montecarlo import MonteCarlo
from tapband.reduction import Reduced

Array = NDArray[np.float64]


def frames(reduced: Reduced) -> dict[str, pd.DataFrame]:
    """coefficients, cp, budget and correlation, by file name without its ending."""
    return {
        "coefficients": coefficients(reduced),
        "cp": tap_coefficients(reduced),
        "budget": budget(reduced),
        "correlation": correlation(reduced),
    }


def coefficients(reduced: Reduced) -> pd.DataFrame:
    """One row a point."""
    assembled, points = reduced.assembled, reduced.assembled.points
    columns: dict[str, object] = {"point": points.names, "run": points.runs}
    columns |= {k: v for k, v in points.columns.items() if k not in columns}
    alpha_u, mach_u, q_u = reduced.condition_u.T
    columns |= {
        "alpha": np.degrees(points.alpha),
        "alpha_u": np.degrees(alpha_u),
        "mach": assembled.stream.mach,
        "mach_u": mach_u,
        "q": _or_missing(reduced, assembled.stream.q),
        "q_u": _or_missing(reduced, q_u),
        "reynolds": reduced.reynolds,
        "taps_used": assembled.nominal.live.sum(axis=1),
    }
    for j, name in enumerate(reduced.outputs):
        columns |= {f"{name}{ending}": value for ending, value in of_coefficient(reduced, j).items()}
    return pd.DataFrame(columns)


def _or_missing(reduced: Reduced, values: Array) -> Array:
    """Pressures of the stream, which pressure-coefficient readings do not have."""
    return np.full_like(values, np.nan) if reduced.campaign.stream == "mach" else values


class BothWays(Protocol):
    """What both propagators say of coefficients, and whether they agree (P, m)."""

    @property
    def linear(self) -> Linearised: ...
    @property
    def montecarlo(self) -> MonteCarlo: ...
    @property
    def agrees(self) -> NDArray[np.bool_]: ...


def of_coefficient(reduced: BothWays, j: int) -> dict[str, object]:
    """The columns of one coefficient by what follows its name."""
    linear, drawn = reduced.linear, reduced.montecarlo
    dof = linear.dof[:, j]
    known = np.isfinite(linear.estimate[:, j])
    agrees = np.where(reduced.agrees[:, j], "yes", "no").astype(object)
    return {
        "": linear.estimate[:, j],
        "_u": linear.u[:, j],
        "_b": linear.systematic[:, j],
        "_s": linear.random[:, j],
        "_dof": np.where(np.isinf(dof), np.nan, dof),
        "_k": linear.k[:, j],
        "_U": linear.U[:, j],
        "_low": linear.low[:, j],
        "_high": linear.high[:, j],
        "_mc": drawn.mean[:, j],
        "_mc_u": drawn.u[:, j],
        "_mc_low": drawn.low[:, j],
        "_mc_high": drawn.high[:, j],
        "_short_low": drawn.short_low[:, j],
        "_short_high": drawn.short_high[:, j],
        "_agrees": np.where(known, agrees, ""),
    }


def tap_coefficients(reduced: Reduced) -> pd.DataFrame:
    """One row a point and tap."""
    assembled = reduced.assembled
    points, taps = assembled.points, reduced.campaign.taps
    count, size = len(points.names), len(taps.names)
    cp, u, expanded = assembled.cp.ravel(), reduced.taps.u.ravel(), reduced.taps.U.ravel()
    return pd.DataFrame(
        {
            "point": np.repeat(np.array(points.names, dtype=object), size),
            "run": np.repeat(np.array(points.runs, dtype=object), size),
            "tap": np.tile(np.array(taps.names, dtype=object), count),
            "x": np.tile(taps.x, count),
            "y": np.tile(taps.y, count),
            "cp": cp,
            "cp_u": u,
            "cp_U": expanded,
            "cp_low": cp - expanded,
            "cp_high": cp + expanded,
            "flag": reduced.taps.flag.ravel(),
        }
    )


def budget(reduced: Reduced) -> pd.DataFrame:
    """One row a point, coefficient and source."""
    assembled, linear = reduced.assembled, reduced.linear
    points, loaded = assembled.points, assembled.loaded
    contribution = linear.contribution
    size, outputs, sources = contribution.shape
    with np.errstate(invalid="ignore", divide="ignore"):
        share = contribution**2 / (linear.u**2)[:, :, None]
    share = np.where((linear.u == 0.0)[:, :, None], 0.0, share)
    standard = np.stack([one.standard for one in loaded], axis=-1)
    dof = np.stack([one.nu for one in loaded], axis=-1)
    sensitivity = np.stack(
        [
            _sensitivity(s, one.standard, sum(e.slot != "added" for e in one.entries))
            for s, one in zip(assembled.problem.sensitivity, loaded, strict=True)
        ],
        axis=-1,
    )
    each = outputs * sources
    names = np.array([one.family.source for one in loaded], dtype=object)
    groups = np.array([one.group for one in loaded], dtype=object)
    return pd.DataFrame(
        {
            "point": np.repeat(np.array(points.names, dtype=object), each),
            "run": np.repeat(np.array(points.runs, dtype=object), each),
            "coefficient": np.tile(np.repeat(np.array(reduced.outputs, dtype=object), sources), size),
            "source": np.tile(names, size * outputs),
            "group": np.tile(groups, size * outputs),
            "standard_uncertainty": np.repeat(standard[:, None, :], outputs, axis=1).ravel(),
            "unit": np.tile(np.array([one.unit for one in loaded], dtype=object), size * outputs),
            "sensitivity": sensitivity.ravel(),
            "contribution": contribution.ravel(),
            "share": share.ravel(),
            "dof": np.repeat(np.where(np.isinf(dof), np.nan, dof)[:, None, :], outputs, axis=1).ravel(),
        }
    )


def _sensitivity(by_latent: Array, standard: Array, inputs: int) -> Array:
    """(P, m) ∂y/∂input per unit reported; NaN where the source acts on several inputs."""
    with np.errstate(invalid="ignore", divide="ignore"):
        one = by_latent[:, :, 0] / standard[:, None]
    return one if by_latent.shape[2] == 1 and inputs <= 1 else np.full_like(one, np.nan)


def correlation(reduced: Reduced) -> pd.DataFrame:
    """One row a point and pair of coefficients."""
    points, linear = reduced.assembled.points, reduced.linear
    outputs = reduced.outputs
    first, second = np.triu_indices(len(outputs), 1)
    covariance = linear.covariance[:, first, second]
    with np.errstate(invalid="ignore", divide="ignore"):
        value = covariance / (linear.u[:, first] * linear.u[:, second])
    names, size = np.array(outputs, dtype=object), len(points.names)
    return pd.DataFrame(
        {
            "point": np.repeat(np.array(points.names, dtype=object), first.size),
            "run": np.repeat(np.array(points.runs, dtype=object), first.size),
            "a": np.tile(names[first], size),
            "b": np.tile(names[second], size),
            "correlation": value.ravel(),
            "covariance": covariance.ravel(),
        }
    )
