"""Points that share their live taps share their weights: one equation a set."""

from __future__ import annotations

from dataclasses import dataclass
from hashlib import sha256

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.chain import Equation
from tapband.experiment.contour import Contour
from tapband.experiment.quadrature import quadrature
from tapband.nouns.campaign import Campaign, Closure

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LiveSet:
    """A set of live taps: its key, the indices of its points, its equation."""

    key: str
    points: NDArray[np.int64]
    equation: Equation


def contour_of(campaign: Campaign, chord_correction: float = 0.0) -> Contour:
    """The section's contour [chords]."""
    section = campaign.section
    scale = section.chord / (section.chord + chord_correction) if section.contour_in_lengths else 1.0
    return Contour.of(section.x * scale, section.y * scale)


def equation_of(
    campaign: Campaign, contour: Contour, s: Array, live: Mask, *, edge: float = 0.0, centre: float = 0.0
) -> Equation:
    """The equation of one set of live taps (n,) at arc lengths ``s`` (n,).

    ``edge`` and ``centre`` correct the closing value and the moment centre.
    """
    reduction, section = campaign.reduction, campaign.section
    closure = reduction.trailing_edge
    rule = quadrature(
        contour,
        s,
        live,
        rule=reduction.integration,
        closure=float(closure.cp) if isinstance(closure, Closure) else closure,
        full_arm=section.full_arm,
        spacing=reduction.spacing,
        edge_correction=edge,
    )
    return Equation.of(
        rule,
        arrangement=campaign.stream,
        pressures=campaign.pressures,
        moment_centre=section.moment_centre + centre,
        in_lengths=section.contour_in_lengths,
        compressibility=reduction.compressibility,
        reference_mach=reduction.reference_mach,
    )


def live_sets(
    campaign: Campaign, contour: Contour, s: Array, live: Mask, *, edge: float = 0.0, centre: float = 0.0
) -> tuple[LiveSet, ...]:
    """The sets that occur among points with live taps ``live`` (P, n), each computed once."""
    members: dict[bytes, list[int]] = {}
    for point, packed in enumerate(np.packbits(live, axis=1)):
        members.setdefault(packed.tobytes(), []).append(point)
    return tuple(
        LiveSet(
            key="live " + sha256(packed).hexdigest()[:16],
            points=np.array(points, dtype=np.int64),
            equation=equation_of(campaign, contour, s, live[points[0]], edge=edge, centre=centre),
        )
        for packed, points in sorted(members.items())
    )
