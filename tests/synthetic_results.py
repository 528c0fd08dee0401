"""Results of any size in the shapes of the tables that go out, for tests of what writes and draws them.

Pressures are those of an exact section; contributions of the sources are drawn, everything that follows
from them (shares, standard uncertainty, degrees of freedom, factor, intervals) is computed, so the tables
agree with each other as real ones do.
"""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from functools import lru_cache
from math import inf, radians

import numpy as np
import pandas as pd
from scipy.special import stdtrit

from exact_sections import KarmanTrefftz, section_of
from tapband.nouns.campaign import Campaign, Intervals, Points, Reduction, Section, Taps
from tapband.nouns.plan import Plan, Target
from tapband.nouns.source import Size, Source, Term
from tapband.report.headline import keys

COEFFICIENTS = ("cn", "ct", "cm", "cl", "cd_pressure")
LEVEL = 0.95
SOURCES: tuple[tuple[str, str, str, str, str], ...] = (
    ("module zero", "scanner", "tap pressure", 'limits = "0.03 % of full scale"', "by module"),
    ("port zero", "scanner", "tap pressure", 'limits = "2 Pa"', "independent"),
    ("port gain", "scanner", "tap pressure", 'expanded = "0.05 % of reading"\nk = 2', "independent"),
    ("flow angle", "angle", "angle", 'standard = "0.03 deg"', ""),
    ("incidence setting", "angle", "angle", 'limits = "0.01 deg"', ""),
    ("total pressure cell", "stream", "total pressure", 'standard = "3 Pa"\ndof = 8', ""),
    ("static pressure cell", "stream", "static pressure", 'lower = "-2 Pa"\nupper = "6 Pa"', ""),
    ("tap drilling", "model", "tap location", 'limits = "0.1 mm"\nshape = "triangular"', "independent"),
    ("chord", "model", "chord", 'standard = "0.1 mm"', ""),
)
AUTOMATIC = ("finite tap spacing", "trailing edge", "rear loading")


@dataclass(frozen=True, kw_only=True)
class Synthetic:
    """Stands where the results of a reduction stand."""

    campaign: Campaign
    tables: dict[str, pd.DataFrame]
    meta: dict[str, object]
    arrays: dict[str, np.ndarray] = field(default_factory=dict)
    exit_status: int = 0
    reduced: None = None


def synthetic(
    points: int = 12,
    taps: int = 41,
    sources: int = 12,
    coefficients: Sequence[str] = COEFFICIENTS,
    names: Sequence[str] | None = None,
    seed: int = 5,
) -> Synthetic:
    """Results of this size; ``names`` replaces the first names of points and sources."""
    rng = np.random.default_rng(seed)
    half = (points + 1) // 2
    alpha = np.concatenate([np.linspace(-4, 10, half), np.linspace(-4, 10, points - half)])
    campaign = _campaign(alpha, half, taps, sources, list(names or []))
    labels = pd.DataFrame({"point": campaign.points.names, "run": campaign.points.runs})  # type: ignore[union-attr]
    values, dof = _contributions(rng, alpha, len(coefficients), sources)
    frame = _coefficients(rng, labels, alpha, coefficients, values, dof)
    tables = {
        "coefficients": frame,
        "cp": _cp(campaign, labels, alpha),
        "budget": _budget(labels, coefficients, [*_source_names(campaign)], values, dof),
        "correlation": _correlation(labels, coefficients, frame),
    }
    return Synthetic(
        campaign=campaign,
        tables=tables,
        meta=_meta(campaign, frame),
        arrays={
            "sensitivity/module zero": rng.normal(size=(points, len(coefficients), 3)),
        },
    )


@lru_cache
def _shape() -> KarmanTrefftz:
    return section_of(0.12, 0.02)


def _source_names(campaign: Campaign) -> list[str]:
    return [source.name for source in campaign.sources] + list(AUTOMATIC)


def _campaign(alpha: np.ndarray, half: int, taps: int, count: int, names: list[str]) -> Campaign:
    shape = _shape()
    x, y = shape.contour(201)
    places = shape.taps(taps | 1, "cosine", 0.97)  # an odd number: one at the nose
    taps = len(places.x)
    declared = [SOURCES[i % len(SOURCES)] for i in range(count - len(AUTOMATIC))]
    labels = [name if i < len(SOURCES) else f"{name} {i}" for i, (name, *_) in enumerate(declared)]
    labels[: min(len(names), len(labels))] = names[: len(labels)]
    text, lines = _declaration(labels, declared)
    sources = tuple(
        Source(
            name=label, group=group, acts_on=(act,),
            size=Size(terms=(Term(lower=-1.0, upper=1.0),), divisor=1.0),
            across_taps=across, across_points="by run", place=f"source[{i + 1}]",
        )
        for i, (label, (_, group, act, _, across)) in enumerate(zip(labels, declared, strict=True))
    )  # fmt: skip
    points = [f"P{i:03d}" for i in range(1, len(alpha) + 1)]
    points[: min(len(names), len(points))] = names[: len(points)]
    runs = ["R1" if i < half else "R2" for i in range(len(alpha))]
    return Campaign(
        name="synthetic", title=names[0] if names else "Section B, entry 2", folder=".",
        section=Section(x=x, y=y, chord=0.4, contour_in_lengths=False, moment_centre=0.25, full_arm=True),
        taps=Taps(
            names=tuple(f"T{i:02d}" for i in range(1, taps + 1)), s=places.s, x=places.x, y=places.y,
            upper=places.upper, excluded=np.zeros(taps, bool), full_scale=np.full(taps, 7e3),
            columns={"module": tuple(f"M{i % 4 + 1}" for i in range(taps))}, placed_in_lengths=False,
        ),
        pressures="relative to static", stream="total and static",
        points=Points(
            names=tuple(points), runs=tuple(runs), columns={"point": tuple(points), "run": tuple(runs)},
            alpha=np.radians(alpha), channels={}, readings=np.zeros((len(alpha), taps)),
            counts=np.ones(len(alpha), dtype=np.int64),
        ),
        channels={}, reduction=Reduction(), intervals=Intervals(level=LEVEL, seed=7), sources=sources,
        plan=Plan(
            targets=(
                Target(coefficient="cl", expanded=0.006),
                Target(coefficient="cd_pressure", expanded=0.0016, alpha_range=(radians(-4), radians(4))),
            ),
            lines=lines,
        ),
        warnings=(), inputs={"campaign.toml": hashlib.sha256(text.encode()).hexdigest()}, declared=text,
    )  # fmt: skip


def _declaration(
    labels: list[str], declared: list[tuple[str, str, str, str, str]]
) -> tuple[str, dict[str, int]]:
    rows = ["format = 1", 'title = "Section B, entry 2"', ""]
    lines: dict[str, int] = {}
    for label, (_, group, act, size, across) in zip(labels, declared, strict=True):
        lines[label] = len(rows) + 1
        rows += ["[[source]]", f"name = {_toml(label)}", f'group = "{group}"', f'acts_on = "{act}"']
        rows += [*size.split("\n"), *([f'across_taps = "{across}"'] if across else [])]
        rows += ['across_points = "by run"', ""]
    return "\n".join(rows), lines


def _toml(text: str) -> str:
    escaped = "".join(c if c.isprintable() and c not in '"\\' else f"\\U{ord(c):08X}" for c in text)
    return f'"{escaped}"'


def _contributions(
    rng: np.random.Generator, alpha: np.ndarray, outputs: int, sources: int
) -> tuple[np.ndarray, np.ndarray]:
    size = 10 ** rng.uniform(-4.3, -2.9, size=(1, outputs, sources))
    slope = rng.uniform(0.2, 1.8, size=(1, outputs, sources))
    grown = size * (1.0 + slope * np.abs(alpha[:, None, None]) / 12.0)
    dof = np.where(np.arange(sources) % 3 == 2, 8.0, inf)
    return grown * rng.uniform(0.95, 1.05, size=grown.shape), np.broadcast_to(dof, grown.shape)


def _coefficients(
    rng: np.random.Generator, labels: pd.DataFrame, alpha: np.ndarray, names: Sequence[str],
    c: np.ndarray, dof: np.ndarray,
) -> pd.DataFrame:  # fmt: skip
    frame = labels.assign(
        alpha=alpha, alpha_u=0.031, mach=0.15, mach_u=0.0004, q=1560.0, q_u=4.2, reynolds=1.37e6, taps_used=41
    )
    exact = _shape().coefficients(np.radians(alpha))
    u = np.sqrt((c**2).sum(-1))
    nu = u**4 / (c**4 / dof).sum(-1)
    k = stdtrit(nu, 0.5 + 0.5 * LEVEL)
    columns: dict[str, np.ndarray] = {}
    for j, name in enumerate(names):
        base = name.split("_ref")[0].split("_stated")[0]
        y = getattr(exact, base) if base != "cd_pressure" else 0.004 + 2e-5 * alpha**2
        bad = (np.arange(len(alpha)) % 7 == 3) & (name == "cd_pressure")
        half = k[:, j] * u[:, j]
        low, high = np.where(bad, 0.80, 0.999) * half, np.where(bad, 1.24, 1.001) * half
        columns |= {
            name: y, f"{name}_u": u[:, j], f"{name}_b": 0.9 * u[:, j], f"{name}_s": np.sqrt(0.19) * u[:, j],
            f"{name}_dof": nu[:, j], f"{name}_k": k[:, j], f"{name}_U": half,
            f"{name}_low": y - half, f"{name}_high": y + half, f"{name}_mc": y, f"{name}_mc_u": u[:, j],
            f"{name}_mc_low": y - low, f"{name}_mc_high": y + high,
            f"{name}_short_low": y - low, f"{name}_short_high": y + high,
            f"{name}_agrees": np.where(bad, "no", "yes"),
        }  # fmt: skip
    return pd.concat([frame, pd.DataFrame(columns)], axis=1)


def _cp(campaign: Campaign, labels: pd.DataFrame, alpha: np.ndarray) -> pd.DataFrame:
    shape = _shape()
    theta = shape.theta_at(campaign.taps.x, campaign.taps.upper)
    cp = shape.cp(theta, np.radians(alpha))
    n, p = cp.shape[1], cp.shape[0]
    u = 0.006 + 0.01 * np.abs(cp)
    frame = labels.loc[np.repeat(np.arange(p), n)].reset_index(drop=True)
    flag = np.full((p, n), "", dtype=object)
    flag[p // 2, n // 3] = "jump against its neighbours"
    flag[0, 2] = "left out"
    cp[0, 2] = u[0, 2] = np.nan
    return frame.assign(
        tap=list(campaign.taps.names) * p, x=np.tile(campaign.taps.x, p), y=np.tile(campaign.taps.y, p),
        cp=cp.ravel(), cp_u=u.ravel(), cp_U=1.96 * u.ravel(), cp_low=(cp - 1.96 * u).ravel(),
        cp_high=(cp + 1.96 * u).ravel(), flag=flag.ravel(),
    )  # fmt: skip


def _budget(
    labels: pd.DataFrame, names: Sequence[str], sources: list[str], c: np.ndarray, dof: np.ndarray
) -> pd.DataFrame:
    p, m, s = c.shape
    rows = labels.loc[np.repeat(np.arange(p), m * s)].reset_index(drop=True)
    unit = [("Pa", "Pa", "Pa", "deg", "deg", "Pa", "Pa", "chord", "chord")[i % 9] for i in range(s)]
    group = ["scanner", "scanner", "scanner", "angle", "angle", "stream", "stream", "model", "model"]
    return rows.assign(
        coefficient=np.tile(np.repeat(list(names), s), p), source=sources * (p * m),
        group=[group[i % 9] for i in range(s)] * (p * m), standard_uncertainty=np.nan, unit=unit * (p * m),
        sensitivity=np.nan, contribution=c.ravel(),
        share=(c**2 / (c**2).sum(-1, keepdims=True)).ravel(), dof=dof.ravel(),
    )  # fmt: skip


def _correlation(labels: pd.DataFrame, names: Sequence[str], frame: pd.DataFrame) -> pd.DataFrame:
    pairs = [(a, b) for i, a in enumerate(names) for b in names[i + 1 :]]
    rows = labels.loc[np.repeat(np.arange(len(labels)), len(pairs))].reset_index(drop=True)
    r = np.tile(np.linspace(-0.9, 0.95, len(pairs)), len(labels))
    u = np.array([[frame[f"{a}_u"] * frame[f"{b}_u"] for a, b in pairs]])[0].T.ravel()
    a, b = (list(side) * len(labels) for side in zip(*pairs, strict=True))
    return rows.assign(a=a, b=b, correlation=r, covariance=r * u)


def _meta(campaign: Campaign, frame: pd.DataFrame) -> dict[str, object]:
    return {
        "format": 1, "kind": "reduce", "level": LEVEL, "seed": 7, "trials": "auto",
        "trials_used": [20000] * len(frame), "versions": {"tapband": "0.1.0", "numpy": np.__version__},
        "inputs": dict(campaign.inputs),
        "corrections": ["static pressure cell: +2 Pa (middle of its bounds)"],
        "warnings": ["points.csv, point P001: tap T03 has no reading; left out of this point's integration"],
        "undeclared": ["hole size", "contour as built", "spanwise uniformity", "walls"],
        "cautions": ["nothing is corrected for walls", "cd_pressure holds no friction"],
        "stated": {
            key: [f"cl = {v:.4f} ± {u:.4f}, an expanded uncertainty."]
            for key, v, u in zip(keys(frame), frame["cl"], frame["cl_U"], strict=True)
        },
    }  # fmt: skip


def ranked(results: Synthetic, groups: int = 8, wired: int = 6) -> Synthetic:
    """The results with rankings of taps, groups and wiring, drawn; shares of taps and of groups sum to one."""
    rng = np.random.default_rng(11)
    frame, taps = results.tables["coefficients"], results.campaign.taps
    names = list(results.tables["budget"]["coefficient"].unique())
    labels = frame[["point", "run"]]

    def rows(column: str, members: Sequence[str], values: dict[str, np.ndarray]) -> pd.DataFrame:
        each = len(names) * len(members)
        out = labels.loc[np.repeat(np.arange(len(labels)), each)].reset_index(drop=True)
        out["coefficient"] = np.tile(np.repeat(names, len(members)), len(labels))
        out[column] = list(members) * (len(labels) * len(names))
        return out.assign(**{name: array.ravel() for name, array in values.items()})

    def shares(members: int) -> np.ndarray:
        raw = rng.normal(1.0, 1.5, size=(len(labels), len(names), members))
        return np.asarray(raw / raw.sum(axis=2, keepdims=True))

    places = [*taps.names, "(not at a tap)"]
    size = (len(labels), len(names), len(places))
    by_tap = {
        "share": shares(len(places)),
        "if_lost": rng.normal(0.0, 1e-3, size),
        "weight": rng.normal(size=size),
    }
    linear = np.abs(shares(groups))
    linear /= linear.sum(axis=2, keepdims=True)
    small = np.full(linear.shape, 2e-4)
    by_group = {
        "linear_share": linear, "first_order": linear, "first_order_ci": small, "total": linear, "total_ci": small,
    }  # fmt: skip
    ways = {
        f"contribution_{way}": rng.uniform(1e-5, 1e-3, size=(len(labels), len(names), wired))
        for way in ("independent", "common", "by_module", "interleaved")
    }
    sources = results.tables["budget"]["source"].unique()[:wired]
    tables = {
        "tap_ranking": rows("tap", places, by_tap),
        "ranking": rows("group", [f"group {i}" for i in range(groups)], by_group),
        "wiring_comparison": rows("source", list(sources), ways).assign(declared="independent"),
    }
    return replace(results, tables=results.tables | tables)
