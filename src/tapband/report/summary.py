"""What the report says before any figure: targets, drivers, doubts, all points, and how it was computed."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from tapband.files.write_columns import COEFFICIENTS
from tapband.report.headline import Verdict, coefficients_of, headline, keys, verdicts
from tapband.report.rounding import MISSING, decimals, fixed, significant

if TYPE_CHECKING:
    import pandas as pd

    from tapband.nouns.campaign import Campaign

Words = dict[str, object]
MAIN = ("cl", "cd_pressure", "cm")
ENDINGS = (
    ("as measured", ""),
    ("at the reference Mach number", "_ref"),
    ("at the stated condition", "_stated"),
)
DRIVERS = 8


def target_words(frame: pd.DataFrame, campaign: Campaign, named: pd.DataFrame | None) -> list[Words]:
    """Each target and whether it is met."""
    return [_target(verdict) for verdict in verdicts(frame, campaign.plan.targets, named)]


def _target(verdict: Verdict) -> Words:
    missed, count = int((~verdict.met).sum()), len(verdict.rows)
    score = f"missed at {missed} of {count} points" if missed else f"met at all {count} points"
    worst = float(np.max(np.where(np.isfinite(verdict.half), verdict.half, np.inf))) if count else np.nan
    return {
        "what": f"{verdict.target.coefficient} ± {verdict.target.expanded:g}",
        "met": "no" if missed else "yes",
        "verdict": score if count else "no point in its range",
        "widest": f"widest ± {significant(worst, 2)}" if count else "",
    }


def driver_words(budget: pd.DataFrame | None, coefficient: str, campaign: Campaign) -> list[Words]:
    """The largest contributors to one coefficient: mean share over the points that have one."""
    if budget is None or budget.empty:
        return []
    rows = budget[np.asarray(budget["coefficient"].astype(object) == coefficient)]
    share = (
        rows["share"].groupby(rows["source"].astype(object), sort=False).mean().sort_values(ascending=False)
    )
    lines = campaign.plan.lines or {}
    return [
        {
            "name": name,
            "line": lines.get(str(name)),
            "width": f"{100 * value:.1f}",
            "share": f"{100 * value:.0f} %",
        }
        for name, value in share.head(DRIVERS).items()
        if value > 0.0
    ]  # fmt: skip


def doubt_words(frame: pd.DataFrame) -> list[Words]:
    """Coefficients whose linearised interval Monte Carlo does not confirm somewhere."""
    labels = keys(frame)
    out: list[Words] = []
    for name in coefficients_of(frame):
        rows = np.flatnonzero(headline(frame, name).from_trials)
        if len(rows):
            out.append({"name": name, "count": len(rows), "where": _where(rows, labels)})
    return out


def empty_words(frame: pd.DataFrame) -> str:
    """Points at which some coefficient has no value."""
    labels, out = keys(frame), []
    for name in coefficients_of(frame):
        rows = np.flatnonzero(~np.isfinite(np.asarray(frame[name], dtype=float)))
        if len(rows):
            out.append(f"{name} at {_where(rows, labels)}")
    return "; ".join(out) + "." if out else ""


def _where(rows: NDArray[np.int64], labels: Sequence[str]) -> str:
    if len(rows) == len(labels):
        return f"all {len(labels)} points" if len(labels) > 1 else "the only point"
    first = ", ".join(labels[i] for i in rows[:6])
    return f"{len(rows)} of {len(labels)} points: {first}{', …' if len(rows) > 6 else ''}"


def point_tables(frame: pd.DataFrame) -> list[Words]:
    """One table a set of coefficients: as measured, at the reference Mach number, at the stated condition."""
    known = coefficients_of(frame)
    rest = tuple(name for name in COEFFICIENTS if name not in MAIN)
    sets = [
        (title, [name + end for name in names if name + end in known])
        for title, end in ENDINGS
        for names in (MAIN, rest)
    ]
    return [_point_table(frame, title, names) for title, names in sets if names]


def _point_table(frame: pd.DataFrame, title: str, names: Sequence[str]) -> Words:
    shown = {name: headline(frame, name) for name in names}
    alpha, mach = (np.asarray(frame[column], dtype=float) for column in ("alpha", "mach"))
    rows = []
    for i, label in enumerate(keys(frame)):
        cells = []
        for name in names:
            one = shown[name]
            places = decimals(one.half[i])
            ends = f"{fixed(one.low[i], places)} … {fixed(one.high[i], places)}"
            half = f"± {fixed(one.half[i], places)}" if np.isfinite(one.half[i]) else MISSING
            trials = bool(one.from_trials[i])
            cells.append(
                {
                    "name": name, "estimate": fixed(one.estimate[i], places), "trials": trials,
                    "interval": ends if trials else half,
                }
            )  # fmt: skip
        taps = frame["taps_used"].iloc[i]
        row = {
            "i": i,
            "key": label,
            "alpha": fixed(alpha[i], 2),
            "mach": fixed(mach[i], 4),
            "taps": int(taps),
        }
        rows.append({**row, "cells": cells})
    return {"title": f"{', '.join(names)} {title}", "names": list(names), "rows": rows}


def facts(meta: Mapping[str, object], campaign: Campaign) -> list[Words]:
    """How it was computed, a line each."""
    versions = meta.get("versions")
    words = ", ".join(f"{k} {v}" for k, v in versions.items()) if isinstance(versions, Mapping) else ""
    reduction, section = campaign.reduction, campaign.section
    closure = reduction.trailing_edge
    edge = (
        closure
        if isinstance(closure, str)
        else f"Cp {closure.cp:g}, standard uncertainty {closure.standard:g}"
    )
    rule = reduction.compressibility
    arm = "full" if section.full_arm else "chordwise: the lever of the tangential force is left out"
    return [
        {"name": name, "value": value}
        for name, value in (
            ("level", f"{100 * campaign.intervals.level:g} %"),
            ("seed", campaign.intervals.seed),
            ("trials", _trials(meta, campaign)),
            ("readings", campaign.pressures),
            ("stream from", campaign.stream),
            ("integration", reduction.integration),
            ("spacing term", "rule difference" if reduction.spacing else "none"),
            ("trailing edge", edge),
            ("moment", f"nose-up about x/c = {section.moment_centre:g}; arm {arm}"),
            ("compressibility", rule if rule == "none" else f"{rule} to M = {reduction.reference_mach:g}"),
            ("chord", f"{section.chord:g} m"),
            ("linearised", "exact derivatives; factor k by Welch-Satterthwaite (JCGM 100, G.4)"),
            ("Monte Carlo", "JCGM 101; compared with the linearised interval by its clause 8"),
            ("versions", words),
        )
        if value != ""
    ]  # fmt: skip


def _trials(meta: Mapping[str, object], campaign: Campaign) -> str:
    used = meta.get("trials_used")
    counts = [int(n) for n in used] if isinstance(used, Sequence) and not isinstance(used, str) else []
    if not counts:
        return campaign.intervals.trials
    spread = f"{min(counts):,}" if min(counts) == max(counts) else f"{min(counts):,} to {max(counts):,}"
    return f"{campaign.intervals.trials}; used {spread} a point".replace(",", "\N{NARROW NO-BREAK SPACE}")
