"""Rankings for the page: what each tap and each group of sources does to the coefficients as measured.

Shares are packed as whole steps of 1e-4 in 16 bits; the tables hold them in full. P points, r coefficients
ranked, n taps, G groups.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from tapband.files.write_columns import COEFFICIENTS
from tapband.report.headline import keys
from tapband.report.packing import codes, packed

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]
STEP = 1e-4
MOST = int(np.iinfo(np.int16).max)
WAYS = ("independent", "common", "by_module", "interleaved")
INDICES = {
    "linear": "linear_share", "first": "first_order", "firstCi": "first_order_ci", "total": "total",
    "totalCi": "total_ci",
}  # fmt: skip


def tap_shares(
    frame: pd.DataFrame | None, labels: Sequence[str], taps: Sequence[str]
) -> dict[str, object] | None:
    """Share (P, r, n) of each tap and (P, r) of what enters elsewhere, change (P, r, n) if it is lost."""
    rows, names = _measured(frame)
    if rows is None:
        return None
    elsewhere = next((str(t) for t in rows["tap"].unique() if t not in set(taps)), None)
    places = [*taps, *([elsewhere] if elsewhere is not None else [])]
    at = (codes(keys(rows), labels), codes(rows["coefficient"], names), codes(rows["tap"], places))
    shape = (len(labels), len(names), len(places))
    share, lost = _filled(rows["share"], at, shape), _filled(rows["if_lost"], at, shape)
    n = len(taps)
    most = np.nanmax(np.abs(lost[:, :, :n]), axis=2, initial=0.0)
    step = np.where(most > 0.0, most / MOST, 1.0)
    return {
        "coefficients": names,
        "share": _steps(share[:, :, :n], STEP),
        "elsewhere": packed(share[:, :, n:].sum(axis=2), "<f4"),
        "lost": _steps(lost[:, :, :n], step[:, :, None]),
        "lostStep": packed(step, "<f4"),
    }


def group_indices(frame: pd.DataFrame | None, labels: Sequence[str]) -> dict[str, object] | None:
    """Linear share and Sobol' indices (P, r, G) of each group, and where they differ more than they may."""
    rows, names = _measured(frame)
    if rows is None:
        return None
    groups = list(dict.fromkeys(rows["group"].astype(object)))
    at = (codes(keys(rows), labels), codes(rows["coefficient"], names), codes(rows["group"], groups))
    shape = (len(labels), len(names), len(groups))
    notes: dict[str, int] = {}
    words: list[str] = []
    if "differs" in rows.columns:
        odd = np.flatnonzero(np.asarray(rows["differs"].astype(object) == "yes"))
        said = rows["note"].astype(object).tolist() if "note" in rows.columns else [""] * len(rows)
        words = list(dict.fromkeys(str(said[i] or "") for i in odd))
        place = {word: k for k, word in enumerate(words)}
        notes = {f"{at[0][i]},{at[1][i]},{at[2][i]}": place[str(said[i] or "")] for i in odd}
    arrays = {short: _steps(_filled(rows[column], at, shape), STEP) for short, column in INDICES.items()}
    return {"coefficients": names, "groups": groups, "differ": notes, "words": words, **arrays}


def wirings(frame: pd.DataFrame | None, labels: Sequence[str]) -> dict[str, object] | None:
    """Contribution (P, r, W, 4) of each source on taps if independent, common, by module, interleaved."""
    rows, names = _measured(frame)
    if rows is None:
        return None
    sources = list(dict.fromkeys(rows["source"].astype(object)))
    declared = dict(zip(rows["source"].astype(object), rows["declared"].astype(object), strict=True))
    at = (codes(keys(rows), labels), codes(rows["coefficient"], names), codes(rows["source"], sources))
    shape = (len(labels), len(names), len(sources))
    parts = np.stack([_filled(rows[f"contribution_{way}"], at, shape) for way in WAYS], axis=-1)
    return {
        "coefficients": names, "sources": sources, "declared": [str(declared[name]) for name in sources],
        "parts": packed(parts, "<f4"),
    }  # fmt: skip


def _measured(frame: pd.DataFrame | None) -> tuple[pd.DataFrame | None, list[str]]:
    """The rows of coefficients as measured; those at other conditions stay in the tables."""
    if frame is None or frame.empty:
        return None, []
    wanted = np.asarray(frame["coefficient"].astype(object).isin(COEFFICIENTS))
    known = set(frame["coefficient"].astype(object))
    return frame.loc[wanted], [name for name in COEFFICIENTS if name in known]


def _filled(values: pd.Series, at: tuple[NDArray[np.int64], ...], shape: tuple[int, ...]) -> Array:
    out = np.full(shape, np.nan)
    out[at] = np.asarray(values, dtype=float)
    return out


def _steps(values: Array, step: float | Array) -> dict[str, str]:
    """Whole steps in 16 bits, the lowest number for what is missing."""
    whole = np.clip(np.rint(values / step), -MOST, MOST)
    return packed(np.where(np.isnan(whole), -MOST - 1, whole), "<i2")
