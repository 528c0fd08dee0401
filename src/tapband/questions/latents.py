"""What correlates points: every coefficient as a sum of latents that points share or do not.

This compact form, one (P, m, G) array a source, is stored with the results and brings every covariance back.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.jacobian import stream_slopes
from tapband.nouns.errors import QuestionError
from tapband.reduction import Reduced
from tapband.reduction.assemble import Assembled

Array = NDArray[np.float64]
Codes = NDArray[np.int64]
WORDS = ("keys", "names", "outputs", "sources", "runs", "configs")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Latents:
    """Estimates (P, m) and, a source each, sensitivities (P, m, G), point-group codes (P,) and dof (P,)."""

    keys: tuple[str, ...]
    names: tuple[str, ...]
    outputs: tuple[str, ...]
    sources: tuple[str, ...]
    estimate: Array
    sensitivity: tuple[Array, ...]
    group: tuple[Codes, ...]
    dof: Array
    """(S, P), inf where exactly known."""
    runs: tuple[str, ...]
    configs: tuple[str, ...]
    """Empty text where the campaign has no such column."""
    alpha: Array
    """(P,) [rad]."""
    mach: Array
    """(P,)."""
    scale: tuple[Codes, ...]
    """Codes (P,) a source: points of one code share its χ² scale, and so its degrees of freedom."""
    on_alpha: Mapping[int, Array]
    """∂alpha/∂ξ (P, G) [rad] of the sources, by index, that move the angle."""
    on_mach: Mapping[int, Array]
    """∂M/∂ξ (P, G) of the sources, by index, that move the Mach number."""
    on_centre: Mapping[int, Array]
    """∂(moment centre)/∂ξ (P, G) [x/c] of the sources, by index, that move it."""
    random: NDArray[np.bool_]
    """(S,) sources that are drawn anew at every point."""

    def index(self, point: str) -> int:
        """Position of a point named POINT, or RUN/POINT where POINT alone is ambiguous."""
        if point in self.keys:
            return self.keys.index(point)
        hits = [i for i, name in enumerate(self.names) if name == point]
        if len(hits) == 1:
            return hits[0]
        if hits:
            offered = ", ".join(self.keys[i] for i in hits)
            raise QuestionError(
                f'point "{point}": must name one point; got {len(hits)}; write one of {offered}'
            )
        some = ", ".join(self.keys[:6]) + (" …" if len(self.keys) > 6 else "")
        raise QuestionError(
            f'point "{point}": must be a point of the campaign; got none of that name; try {some}'
        )

    def covariance(self, a: int, b: int) -> Array:
        """(m, m) covariance of the coefficients of point a (rows) with those of point b (columns)."""
        total = np.zeros((len(self.outputs), len(self.outputs)))
        for s, codes in zip(self.sensitivity, self.group, strict=True):
            if codes[a] == codes[b]:
                total += s[a] @ s[b].T
        return total


def latents_of(reduced: Reduced) -> Latents:
    """The latents of a reduced campaign."""
    return latents_at(reduced.assembled)


def latents_at(assembled: Assembled) -> Latents:
    """The latents of an assembled campaign; no propagation is needed."""
    problem, points = assembled.problem, assembled.points
    families = problem.families
    on_alpha, on_mach, on_centre = _on_conditions(assembled)
    return Latents(
        keys=points.keys,
        names=points.names,
        outputs=problem.outputs,
        sources=tuple(f.source for f in families),
        estimate=problem.estimate,
        sensitivity=tuple(problem.sensitivity),
        group=tuple(_codes(f.point_group) for f in families),
        dof=np.stack([one.nu for one in assembled.loaded]) if families else np.empty((0, len(points.names))),
        runs=points.runs,
        configs=points.columns.get("config", ("",) * len(points.names)),
        alpha=points.alpha,
        mach=assembled.stream.mach,
        scale=tuple(_codes(f.scale_group) for f in families),
        on_alpha=on_alpha,
        on_mach=on_mach,
        on_centre=on_centre,
        random=np.array([not f.systematic for f in families], dtype=np.bool_),
    )


def _codes(groups: Sequence[str]) -> Codes:
    return np.unique(np.asarray(groups, dtype=object).astype(str), return_inverse=True)[1].ravel()


def _on_conditions(assembled: Assembled) -> tuple[dict[int, Array], dict[int, Array], dict[int, Array]]:
    """What each source adds to alpha, to M and to the moment centre, (P, G) by its index."""
    slopes = stream_slopes(assembled.sets[0].equation, assembled.points.channels, assembled.corrected.shifts)
    alpha: dict[int, Array] = {}
    mach: dict[int, Array] = {}
    centre: dict[int, Array] = {}
    for s, one in enumerate(assembled.loaded):
        for entry in one.entries:
            if entry.slot == "alpha":
                into, by = alpha, entry.load
            elif entry.slot == "centre":
                into, by = centre, entry.load
            elif entry.slot in slopes:
                into, by = mach, entry.load * slopes[entry.slot].mach
            else:
                continue
            rows = into.setdefault(s, np.zeros((len(entry.load), len(one.family.members))))
            rows[:, int(entry.member[0])] += by
    return alpha, mach, centre


def to_arrays(latents: Latents) -> dict[str, Array | Codes | NDArray[np.str_] | NDArray[np.bool_]]:
    """Plain arrays by name, fit for storing."""
    arrays: dict[str, Array | Codes | NDArray[np.str_] | NDArray[np.bool_]] = {
        name: np.array(getattr(latents, name), dtype=np.str_) for name in WORDS
    }
    for name in ("estimate", "dof", "alpha", "mach", "random"):
        arrays[name] = getattr(latents, name)
    for i, (s, codes) in enumerate(zip(latents.sensitivity, latents.group, strict=True)):
        arrays[f"sensitivity {i}"], arrays[f"group {i}"] = s, codes
        arrays[f"scale {i}"] = latents.scale[i]
    for word, parts in (
        ("alpha", latents.on_alpha),
        ("mach", latents.on_mach),
        ("centre", latents.on_centre),
    ):
        arrays |= {f"on {word} {i}": part for i, part in parts.items()}
    return arrays


def from_arrays(arrays: Mapping[str, Array]) -> Latents:
    """Inverse of :func:`to_arrays`."""
    words = {name: tuple(np.asarray(arrays[name]).tolist()) for name in WORDS}
    count = range(len(words["sources"]))
    sizes = {
        word: {i: arrays[f"on {word} {i}"] for i in count if f"on {word} {i}" in arrays}
        for word in ("alpha", "mach", "centre")
    }
    return Latents(
        **{name: tuple(str(item) for item in items) for name, items in words.items()},
        estimate=arrays["estimate"],
        dof=arrays["dof"],
        alpha=arrays["alpha"],
        mach=arrays["mach"],
        random=np.asarray(arrays["random"], dtype=np.bool_),
        sensitivity=tuple(arrays[f"sensitivity {i}"] for i in count),
        group=tuple(np.asarray(arrays[f"group {i}"], dtype=np.int64) for i in count),
        scale=tuple(np.asarray(arrays[f"scale {i}"], dtype=np.int64) for i in count),
        on_alpha=sizes["alpha"],
        on_mach=sizes["mach"],
        on_centre=sizes["centre"],
    )
