"""What correlates points: every coefficient as a sum of latents that points share or do not.

This compact form, one (P, m, G) array a source, is stored with the results and brings every covariance back.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tapband.nouns.errors import QuestionError
from tapband.reduction import Reduced

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Latents:
    """Estimates (P, m) and, a source each, sensitivities (P, m, G), point-group codes (P,) and dof (P,)."""

    keys: tuple[str, ...]
    names: tuple[str, ...]
    outputs: tuple[str, ...]
    sources: tuple[str, ...]
    estimate: Array
    sensitivity: tuple[Array, ...]
    group: tuple[NDArray[np.int64], ...]
    dof: Array
    """(S, P), inf where exactly known."""

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
    problem, points = reduced.assembled.problem, reduced.assembled.points
    return Latents(
        keys=points.keys,
        names=points.names,
        outputs=problem.outputs,
        sources=tuple(f.source for f in problem.families),
        estimate=problem.estimate,
        sensitivity=tuple(problem.sensitivity),
        group=tuple(np.unique(f.point_group, return_inverse=True)[1].ravel() for f in problem.families),
        dof=np.stack([one.nu for one in reduced.assembled.loaded]),
    )


def to_arrays(latents: Latents) -> dict[str, Array | NDArray[np.int64] | NDArray[np.str_]]:
    """Plain arrays by name, fit for storing."""
    arrays: dict[str, Array | NDArray[np.int64] | NDArray[np.str_]] = {
        name: np.array(getattr(latents, name), dtype=np.str_)
        for name in ("keys", "names", "outputs", "sources")
    }
    arrays["estimate"], arrays["dof"] = latents.estimate, latents.dof
    for i, (s, codes) in enumerate(zip(latents.sensitivity, latents.group, strict=True)):
        arrays[f"sensitivity {i}"], arrays[f"group {i}"] = s, codes
    return arrays


def from_arrays(arrays: Mapping[str, Array]) -> Latents:
    """Inverse of :func:`to_arrays`."""
    words: dict[str, Sequence[str]] = {
        name: tuple(np.asarray(arrays[name]).tolist()) for name in ("keys", "names", "outputs", "sources")
    }
    count = range(len(words["sources"]))
    return Latents(
        keys=tuple(words["keys"]),
        names=tuple(words["names"]),
        outputs=tuple(words["outputs"]),
        sources=tuple(words["sources"]),
        estimate=arrays["estimate"],
        dof=arrays["dof"],
        sensitivity=tuple(arrays[f"sensitivity {i}"] for i in count),
        group=tuple(np.asarray(arrays[f"group {i}"], dtype=np.int64) for i in count),
    )
