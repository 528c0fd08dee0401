"""What a campaign may say but seldom means: warnings that go into every report."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from tapband.files.acts import ACTS, Arrangement
from tapband.files.faults import Findings, listed, shown
from tapband.nouns.campaign import VACUUM, Channel, Closure, Points, Reduction, Section, Taps
from tapband.nouns.source import INDEPENDENT, Scale, Source


def warn_of_sources(
    sources: Sequence[Source], section: Section, taps: Taps, points: Points | None,
    channels: dict[str, Channel], arrangement: Arrangement, findings: Findings,
) -> None:  # fmt: skip
    """Warn of sources that are legal and probably not meant."""
    for source in sources:
        if "chord" in source.acts_on and not (section.contour_in_lengths or taps.placed_in_lengths):
            findings.warn(
                f"source {shown(source.name)} acts on the Reynolds number alone: contour and taps are "
                "stated in fractions of the chord"
            )
        if points is not None:
            _warn_of_gauge(source, taps, points, channels, arrangement, findings)
    if points is not None and points.counts.max() > 1:
        _warn_of_noise(sources, findings)


def _warn_of_gauge(
    source: Source, taps: Taps, points: Points, channels: dict[str, Channel], arrangement: Arrangement,
    findings: Findings,
) -> None:  # fmt: skip
    """Per cent of an absolute reading, where the full scale says that a gauge pressure is measured."""
    if not any(term.scale is Scale.READING and term.half > 0.0 for term in source.size.terms):
        return
    for act in source.acts_on:
        channel = arrangement.channel(act)
        if channel == "taps" and arrangement.pressures == VACUUM:
            live = ~taps.excluded
            scale = taps.full_scale if source.full_scale is None else np.full(live.shape, source.full_scale)
            values, scales = points.readings[:, live], scale[live]
        elif channel in points.channels and ACTS[act].channel in {"p_total", "p_static", ""}:
            stated = channels[channel].full_scale if channel in channels else np.nan
            scales = np.array([stated if source.full_scale is None else source.full_scale])
            values = points.channels[channel][:, None]
        else:
            continue
        past = np.abs(values) > scales
        if np.any(past):
            findings.warn(
                f"source {shown(source.name)} is per cent of the reading, and {act} readings stand in the "
                "table as absolute pressures beyond the full scale: a gauge instrument reads the difference "
                "from its reference; state the size per cent of full scale, or give gauge readings"
            )


def _warn_of_noise(sources: Sequence[Source], findings: Findings) -> None:
    """Noise from point to point is in the scatter of samples already."""
    acts = {"tap pressure", "total pressure", "static pressure", "pressure difference", "dynamic pressure"}
    acts |= {"reference pressure", "mach", "angle", "tap coefficient"}
    noise = [
        source.name
        for source in sources
        if source.across_points == INDEPENDENT and acts & set(source.acts_on) and _size(source) > 0.0
    ]
    if noise:
        findings.warn(
            "points have samples, whose scatter is counted; noise from point to point declared beside them "
            f"is counted twice: {listed(shown(name) for name in noise)}"
        )


def _size(source: Source) -> float:
    return max(term.half for term in source.size.terms)


def warn_of_reduction(reduction: Reduction, sources: Sequence[Source], findings: Findings) -> None:
    """Warn of reduction settings that have no effect."""
    if reduction.compressibility == "none" and reduction.reference_mach > 0.0:
        findings.warn("reduction.reference_mach has no effect: no compressibility rule is chosen")
    stated = any("trailing-edge coefficient" in source.acts_on for source in sources)
    if stated and isinstance(reduction.trailing_edge, Closure) and reduction.trailing_edge.standard > 0.0:
        findings.warn(
            "reduction.trailing_edge.standard is set aside: a declared source acts on the "
            "trailing-edge coefficient"
        )
