"""What the page computes with: every array packed, every text as it is, one object for the whole page.

Arrays are little-endian, base64; ``null`` columns are absent. The page unpacks them into typed arrays.
P points, m coefficients, S sources, n taps.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from statistics import NormalDist
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from tapband.files.write_columns import COEFFICIENTS
from tapband.report.headline import coefficients_of, keys, verdicts
from tapband.report.packing import codes, packed
from tapband.report.page_rank import group_indices, tap_shares, wirings
from tapband.report.source_text import templates

if TYPE_CHECKING:
    import pandas as pd

    from tapband.nouns.campaign import Campaign
    from tapband.report.publish import Outcome

Array = NDArray[np.float64]
EXACT = 50_000
"""Contributions are stored in full up to this many, else as 32-bit floats (6e-8 relative)."""
OUTLINE = 400
"""Most points of the contour drawn."""
EXACT_COLUMNS = {
    "est": "", "u": "_u", "dof": "_dof", "k": "_k", "U": "_U", "low": "_low", "high": "_high",
    "mcLow": "_mc_low", "mcHigh": "_mc_high",
}  # fmt: skip
SHOWN_COLUMNS = {
    "b": "_b", "s": "_s", "mc": "_mc", "mcU": "_mc_u", "shortLow": "_short_low", "shortHigh": "_short_high",
}  # fmt: skip


def page_data(results: Outcome, campaign: Campaign) -> dict[str, object]:
    """Everything the page draws and recomputes."""
    frame = results.tables["coefficients"]
    level = float(str(results.meta.get("level", 0.95)))
    names = coefficients_of(frame)
    return {
        "kind": results.meta.get("kind", "reduce"),
        "level": level,
        "z": NormalDist().inv_cdf(0.5 + 0.5 * level),
        "points": _points(results, frame),
        "coefficients": [_coefficient(frame, name) for name in names],
        "targets": [
            {"coefficient": v.target.coefficient, "expanded": v.target.expanded, "rows": v.rows.tolist()}
            for v in verdicts(frame, campaign.plan.targets, results.tables.get("targets"))
        ],
        **_budget(results.tables.get("budget"), keys(frame), names, campaign),
        "taps": _taps(results, keys(frame), campaign),
        "correlation": _correlation(results.tables.get("correlation"), keys(frame), names),
        "outline": _outline(campaign),
        "tapShares": tap_shares(results.tables.get("tap_ranking"), keys(frame), campaign.taps.names),
        "wirings": wirings(results.tables.get("wiring_comparison"), keys(frame)),
        "groups": group_indices(results.tables.get("ranking"), keys(frame)),
        "decisions": _decisions(results.tables.get("decisions"), keys(frame), names, campaign),
        "file": campaign.name,
    }  # fmt: skip


def _points(results: Outcome, frame: pd.DataFrame) -> dict[str, object]:
    stated = results.meta.get("stated")
    labels = keys(frame)
    sentences = stated if isinstance(stated, Mapping) else {}
    config = frame["config"].astype(object).tolist() if "config" in frame.columns else [""] * len(frame)
    return {
        "key": labels,
        "run": [str(v) if isinstance(v, str) else "" for v in frame["run"].astype(object)],
        "config": [v if isinstance(v, str) else "" for v in config],
        "alpha": packed(frame["alpha"]),
        "mach": packed(frame["mach"]),
        "q": packed(frame["q"]),
        "reynolds": packed(frame["reynolds"]),
        "taps": packed(frame["taps_used"]),
        "stated": [list(sentences.get(key, [])) for key in labels],
    }


def _coefficient(frame: pd.DataFrame, name: str) -> dict[str, object]:
    columns = {
        short: packed(np.asarray(frame[f"{name}{ending}"], dtype=float), kind)
        for group, kind in ((EXACT_COLUMNS, "<f8"), (SHOWN_COLUMNS, "<f4"))
        for short, ending in group.items()
    }
    agrees = frame.get(f"{name}_agrees")
    no = [] if agrees is None else np.flatnonzero(np.asarray(agrees.astype(object) == "no")).tolist()
    return {"name": name, "unconfirmed": no, **columns}


def _budget(
    frame: pd.DataFrame | None, labels: Sequence[str], names: Sequence[str], campaign: Campaign
) -> dict[str, object]:
    """Sources in order of appearance, their contributions (P, m, S) and degrees of freedom (P, S)."""
    if frame is None or frame.empty:
        return {"sources": [], "contribution": packed([]), "dof": packed([])}
    sources = list(dict.fromkeys(frame["source"].astype(object)))
    groups = dict(zip(frame["source"].astype(object), frame["group"].astype(object), strict=True))
    units = dict(zip(frame["source"].astype(object), frame["unit"].astype(object), strict=True))
    at = (codes(keys(frame), labels), codes(frame["coefficient"], names), codes(frame["source"], sources))
    shape = (len(labels), len(names), len(sources))

    def filled(column: str, blank: float) -> Array:
        out = np.full(shape, blank)
        values = np.asarray(frame[column], dtype=float)
        out[at] = np.where(np.isnan(values), blank, values)
        return out

    contribution = filled("contribution", 0.0)
    single: NDArray[np.bool_] = np.any(np.isfinite(filled("sensitivity", np.nan)), axis=(0, 1))
    texts, lines = templates(campaign), campaign.plan.lines or {}
    listed = [
        {
            "name": name, "group": groups[name], "unit": units[name], "line": lines.get(name),
            "text": texts.get(name), "single": bool(single[i]),
        }
        for i, name in enumerate(sources)
    ]  # fmt: skip
    return {
        "sources": listed,
        "contribution": packed(contribution, "<f8" if contribution.size <= EXACT else "<f4"),
        "dof": packed(filled("dof", np.inf).min(axis=1)),
        "size": packed(np.fmax.reduce(filled("standard_uncertainty", np.nan), axis=1), "<f4"),
    }


def _taps(results: Outcome, labels: Sequence[str], campaign: Campaign) -> dict[str, object]:
    """Cp with its band (P, n), flags by "point,tap", and how much of each band a source makes (P, n, S)."""
    frame, taps = results.tables["cp"], campaign.taps
    at = (codes(keys(frame), labels), codes(frame["tap"], taps.names))
    shape = (len(labels), len(taps.names))

    def filled(column: str) -> Array:
        out = np.full(shape, np.nan)
        out[at] = np.asarray(frame[column], dtype=float)
        return out

    flags = {
        f"{p},{t}": flag
        for p, t, flag in zip(*at, frame["flag"].astype(object), strict=True)
        if isinstance(flag, str) and flag
    }
    return {
        "name": list(taps.names), "x": packed(taps.x, "<f4"), "y": packed(taps.y, "<f4"),
        "upper": packed(taps.upper, "<u1"), "flags": flags, "parts": _tap_parts(results),
        "cp": packed(filled("cp"), "<f4"), "U": packed(filled("cp_U"), "<f4"),
    }  # fmt: skip


def _tap_parts(results: Outcome) -> dict[str, str] | None:
    """Root of each source's share in the variance of Cp, in steps of 1/255: a band to half a percent."""
    if results.reduced is None:
        return None
    variance = results.reduced.assembled.cp_variance
    total = variance.sum(axis=2, keepdims=True)
    share = np.divide(variance, total, out=np.zeros_like(variance), where=total > 0.0)
    return packed(np.rint(255.0 * np.sqrt(np.nan_to_num(share))), "<u1")


def _correlation(
    frame: pd.DataFrame | None, labels: Sequence[str], names: Sequence[str]
) -> dict[str, object] | None:
    """Of the coefficients as measured (P, c, c), symmetric, ones on the diagonal."""
    if frame is None or frame.empty:
        return None
    known = [name for name in COEFFICIENTS if name in names]
    rows = frame.loc[
        np.asarray(frame["a"].astype(object).isin(known) & frame["b"].astype(object).isin(known))
    ]
    p, a, b = codes(keys(rows), labels), codes(rows["a"], known), codes(rows["b"], known)
    out = np.broadcast_to(np.eye(len(known)), (len(labels), len(known), len(known))).copy()
    out[p, a, b] = out[p, b, a] = np.asarray(rows["correlation"], dtype=float)
    return {"names": known, "r": packed(out, "<f4")}


def _decisions(
    frame: pd.DataFrame | None, labels: Sequence[str], names: Sequence[str], campaign: Campaign
) -> list[dict[str, object]]:
    """Each decision in the order of its table: point, coefficient, limits (null: none) and guard [U]."""
    if frame is None or "run" not in frame.columns:  # the point alone may be ambiguous
        return []
    rows = zip(
        codes(keys(frame), labels),
        codes(frame["coefficient"], names),
        frame["lower"],
        frame["upper"],
        strict=True,
    )
    guards = {(limit.coefficient, limit.lower, limit.upper): limit.guard for limit in campaign.plan.limits}
    return [
        {
            "point": int(p), "coefficient": int(j), "lower": low, "upper": high,
            "guard": guards.get((names[j], low, high)),
        }
        for p, j, low, high in rows
    ]  # fmt: skip


def _outline(campaign: Campaign) -> dict[str, object]:
    section = campaign.section
    keep = np.unique(np.linspace(0, len(section.x) - 1, min(len(section.x), OUTLINE)).astype(int))
    return {"x": packed(section.x[keep], "<f4"), "y": packed(section.y[keep], "<f4")}
