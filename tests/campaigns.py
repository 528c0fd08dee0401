"""Campaigns built in memory for tests: exact flow about a closed-form section, any sources."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from math import inf

import numpy as np
from numpy.typing import NDArray

from exact_sections import KarmanTrefftz, TapPlaces, section_of
from tapband.experiment.contour import Contour
from tapband.experiment.stream import solve
from tapband.nouns.campaign import Campaign, Channel, Intervals, Points, Reduction, Section, Taps
from tapband.nouns.source import COMMON, INDEPENDENT, Scale, Shape, Size, Source, Term, divisor_of

Array = NDArray[np.float64]
TWELVE = section_of(0.12, 0.02)


def size(
    half: float,
    shape: Shape = Shape.NORMAL,
    scale: Scale = Scale.ABSOLUTE,
    *,
    top: float = 0.0,
    dof: float = inf,
    reliability: float = 0.0,
    middle: float = 0.0,
) -> Size:
    """±half about a middle, or a standard uncertainty where the shape is normal."""
    return Size(
        terms=(Term(lower=middle - half, upper=middle + half, scale=scale),),
        divisor=1.0 if shape is Shape.NORMAL else divisor_of(shape, top),
        shape=shape,
        top=top,
        dof=dof,
        reliability=reliability,
    )


def source(
    name: str,
    acts_on: str | Sequence[str],
    of: Size,
    across_points: str = COMMON,
    across_taps: str = "",
    **more: object,
) -> Source:
    """A source with the defaults tests want."""
    acts = (acts_on,) if isinstance(acts_on, str) else tuple(acts_on)
    return Source(
        name=name,
        group=str(more.pop("group", name)),
        acts_on=acts,
        size=of,
        across_points=across_points,
        across_taps=across_taps,
        **more,  # type: ignore[arg-type]
    )


def every_kind() -> tuple[Source, ...]:
    """One source of every kind that acts where pressures are measured."""
    rect, tri = Shape.RECTANGULAR, Shape.TRIANGULAR
    return (
        source("port zero", "tap pressure", size(4.0), INDEPENDENT, INDEPENDENT),
        source("module zero", "tap pressure", size(6.0, rect), "by run", "by module"),
        source("gain", "tap pressure", size(0.002, tri, Scale.READING), COMMON, "by module"),
        source("range", "tap pressure", size(0.0003, Shape.ARCSINE, Scale.FULL_SCALE), COMMON, COMMON),
        source("hole", "tap coefficient", size(0.002, dof=9.0), COMMON, INDEPENDENT),
        source("place", "tap location", size(4e-4, rect), COMMON, INDEPENDENT),
        source("row", "tap row", size(3e-4), COMMON, COMMON),
        source("total", "total pressure", size(8.0, Shape.TRAPEZOIDAL, top=0.5), INDEPENDENT),
        source("static", "static pressure", size(6.0, rect, reliability=0.2), INDEPENDENT),
        source("tunnel", "mach", size(0.0008), COMMON),
        source("unsteady", "dynamic pressure", size(9.0), INDEPENDENT),
        source("angle", "angle", size(np.radians(0.03)), COMMON),
        source("lever", "moment centre", size(0.0005), COMMON),
        source("balance of doubt", "cm", size(0.0004), COMMON),
        source("one-sided", "static pressure", size(2.0, rect, middle=2.0), "by run"),
    )


def campaign(
    sources: Sequence[Source] = (),
    *,
    section: KarmanTrefftz = TWELVE,
    taps: TapPlaces | None = None,
    alphas: Sequence[float] = (0.0, 4.0, 8.0),
    mach: float = 0.3,
    p_total: float = 101_325.0,
    modules: Sequence[str] | None = None,
    runs: Sequence[str] | None = None,
    stream: str = "total and static",
    pressures: str = "relative to vacuum",
    lost: Mapping[tuple[int, int], bool] | None = None,
    channels: Mapping[str, Channel] | None = None,
    in_lengths: bool = False,
    noise: Array | None = None,
    level: float = 0.95,
    trials: str = "auto",
    seed: int = 1,
    contour_points: int = 401,
    shape: tuple[Array, Array] | None = None,
    cp: Array | None = None,
    full_scale: float = 130_000.0,
    chord: float = 0.4,
    **reduction: object,
) -> Campaign:
    """Exact incompressible flow read by ideal instruments at a Mach number; angles [deg].

    ``noise`` (P, n) [Pa] is added to the tap readings. ``shape`` and ``cp`` (P, n) replace the section's own
    contour and flow.
    """
    places = section.taps(41, "cosine", 0.98) if taps is None else taps
    x, y = section.contour(contour_points) if shape is None else shape
    contour = Contour.of(x, y)
    s = np.clip(places.s, contour.s_lower, contour.s_upper)
    count, size_ = s.size, len(alphas)
    alpha = np.radians(np.asarray(alphas, dtype=np.float64))
    names = tuple(f"T{i + 1:02d}" for i in range(count))
    wired = tuple(modules) if modules is not None else tuple(f"M{i * 4 // count + 1}" for i in range(count))
    static = p_total / (1.0 + 0.2 * mach**2) ** 3.5
    q = 0.7 * static * mach**2
    ones = np.ones(size_)
    values = {
        "p_total": p_total * ones,
        "p_static": static * ones,
        "p_difference": (p_total - static) * ones,
        "q": q * ones,
        "mach": mach * ones,
        "p_ambient": (static + 300.0) * ones,
    }
    wanted = {
        "total and static": ["p_total", "p_static"],
        "difference and static": ["p_difference", "p_static"],
        "dynamic and mach": ["q", "mach", "p_static"],
        "mach": ["mach"],
    }[stream]
    if pressures == "relative to p_ambient":
        wanted = [*wanted, "p_ambient"]
    used = {name: values[name] for name in wanted}
    cp = section.cp(places.theta, alpha) if cp is None else cp
    state = solve(stream, pressures, used)
    readings = cp * state.q[:, None] - state.offset[:, None] + (0.0 if noise is None else noise)
    for at in lost or {}:
        readings[at] = np.nan
    run = tuple(runs) if runs is not None else ("R1",) * size_
    labels = tuple(f"P{i + 1}" for i in range(size_))
    return Campaign(
        name="campaign",
        title="exact flow",
        folder="",
        section=Section(
            x=x, y=y, chord=chord, contour_in_lengths=in_lengths, moment_centre=0.25, full_arm=True
        ),
        taps=Taps(
            names=names,
            s=s,
            x=places.x,
            y=places.y,
            upper=places.upper,
            excluded=np.zeros(count, dtype=np.bool_),
            full_scale=np.full(count, full_scale),
            columns={"module": wired},
            placed_in_lengths=in_lengths,
        ),
        pressures=pressures,
        stream=stream,
        points=Points(
            names=labels,
            runs=run,
            columns={"point": labels, "run": run},
            alpha=alpha,
            channels=used,
            readings=readings,
            counts=np.ones(size_, dtype=np.int64),
            t_total=np.full(size_, 293.0),
        ),
        channels=channels or {},
        reduction=Reduction(**reduction),  # type: ignore[arg-type]
        intervals=Intervals(level=level, trials=trials, seed=seed),
        sources=tuple(sources),
    )
