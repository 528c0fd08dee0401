"""Campaigns with a plan, built in memory for tests."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from campaigns import campaign, size, source
from tapband.nouns.campaign import Campaign
from tapband.nouns.plan import Forecast, Layout, Option, Plan, Slot, Target, Wiring
from tapband.nouns.source import COMMON, INDEPENDENT, Scale, Shape, Source

ANGLES = (-2.0, 2.0, 6.0)


def instruments(zero: float = 3.0, setting: float = 0.02, place: float = 1.5e-4) -> tuple[Source, ...]:
    """A scanner, an angle and holes: port zeros [Pa], angle setting [deg], tap places [chords]."""
    return (
        source("module zero", "tap pressure", size(4.0, Shape.RECTANGULAR), "by run", "by module"),
        source("port zero", "tap pressure", size(zero), COMMON, INDEPENDENT),
        source(
            "gain", "tap pressure", size(0.0004, Shape.NORMAL, Scale.READING, dof=12.0), COMMON, "by module"
        ),
        source("angle setting", "angle", size(np.radians(setting), dof=6.0), INDEPENDENT),
        source("static", "static pressure", size(8.0, Shape.RECTANGULAR), COMMON),
        source("tap place", "tap location", size(place), COMMON, INDEPENDENT),
    )


def forecast(alphas: Sequence[float] = ANGLES, **more: object) -> Forecast:
    """A forecast at these angles [deg], Mach 0.2."""
    stated: dict[str, object] = {"p_total": 101_325.0, "t_total": 293.0, "mach": 0.2, **more}
    return Forecast(alpha=tuple(np.radians(alphas).tolist()), **stated)  # type: ignore[arg-type]


def targets(cl: float = 0.012, cd: float = 0.005, cm: float = 0.003) -> tuple[Target, ...]:
    """One target a coefficient, everywhere."""
    return (
        Target(coefficient="cl", expanded=cl),
        Target(coefficient="cd_pressure", expanded=cd),
        Target(coefficient="cm", expanded=cm),
    )


def planned(
    sources: Sequence[Source] = (),
    *,
    wanted: Sequence[Target] | None = None,
    slots: Sequence[Slot] = (),
    layout: Layout | None = None,
    wiring: Wiring | None = None,
    ahead: Forecast | None = None,
    readings: bool = False,
    **more: object,
) -> Campaign:
    """A campaign with a forecast; with readings at the same angles where asked for."""
    plan = Plan(
        targets=tuple(targets() if wanted is None else wanted),
        forecast=forecast() if ahead is None else ahead,
        slots=tuple(slots),
        layout=layout,
        wiring=wiring,
    )
    pressures = str(more.pop("pressures", "relative to static"))
    made = campaign(
        sources or instruments(),
        alphas=more.pop("alphas", ANGLES),
        mach=0.2,
        pressures=pressures,
        **more,  # type: ignore[arg-type]
    )
    return replace(made, plan=plan, points=made.points if readings else None)


def scanner_slot(costs: Sequence[float] = (9000.0, 6000.0, 2500.0, 5000.0)) -> Slot:
    """A scanner of four ranges: fine, middling, coarse, and one too small for the readings."""
    sizes = ((3.0, 1.5, 8000.0), (6.0, 4.0, 17_000.0), (16.0, 9.0, 35_000.0), (1.0, 0.8, 1500.0))
    options = []
    for cost, (module, port, full) in zip(costs, sizes, strict=True):
        sources = (
            source("module zero", "tap pressure", size(module, Shape.RECTANGULAR), "by run", "by module"),
            source("port zero", "tap pressure", size(port), COMMON, INDEPENDENT),
        )
        options.append(Option(name=f"{full:g} Pa", cost=cost, full_scale=full, sources=sources))
    return Slot(name="scanner", replaces=("module zero", "port zero"), options=tuple(options))


def angle_slot() -> Slot:
    """Two ways to set the angle."""
    options = [
        Option(
            name=name,
            cost=cost,
            sources=(source("angle setting", "angle", size(np.radians(u), dof=6.0), INDEPENDENT),),
        )
        for name, cost, u in (("servo", 2400.0, 0.01), ("scale", 300.0, 0.08))
    ]
    return Slot(name="angle", replaces=("angle setting",), options=tuple(options))
