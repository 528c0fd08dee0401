"""The same declared error, differently wired, on the flow that the table was computed for.

Orders of size recomputed independently of this project (to 20 %): inviscid 12 % four-digit section at 8°,
48 taps and one at the nose at x = 0.97 t², ±0.05 % of 7 kPa, q = 1.5 kPa, chord 300 mm.
"""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray

from campaigns import campaign, size, source
from exact_sections import TapPlaces
from tapband.experiment.contour import Contour
from tapband.experiment.inviscid import solve
from tapband.experiment.sections import four_digit
from tapband.nouns.campaign import Campaign
from tapband.nouns.source import Shape, Source
from tapband.probability.linearised import propagate
from tapband.reduction import assemble

Array = NDArray[np.float64]
CL, CD = 3, 4
COUNTS = 1e-4
MACH = np.sqrt(1500.0 / (0.7 * 101_325.0))


@cache
def _flow() -> tuple[tuple[Array, Array], TapPlaces, Array]:
    shape = four_digit(0.0, 0.0, 0.12)
    contour = Contour.of(*shape)
    x = 0.97 * (np.arange(25) / 24.0) ** 2
    stations = np.r_[x[:0:-1], x]
    upper = np.arange(49) >= 24
    s = contour.place_x(stations, upper)
    px, py = contour.point(s)
    cp = solve(*shape, np.radians([8.0]), panels=300).cp(s)
    return shape, TapPlaces(theta=np.zeros(49), s=s, x=px, y=py, upper=upper), cp


def _campaign(sources: list[Source], modules: list[str]) -> Campaign:
    shape, places, cp = _flow()
    return campaign(
        sources, shape=shape, taps=places, cp=cp, alphas=(8.0,), mach=float(MACH),
        p_total=101_325.0 * (1 + 0.2 * float(MACH) ** 2) ** 3.5, modules=modules, full_scale=7000.0,
        chord=0.3, pressures="relative to static", spacing=False,
    )  # fmt: skip


def _u(sources: list[Source], modules: list[str]) -> tuple[float, float]:
    """u of cl, and of cd_pressure in counts, from the declared errors alone."""
    assembled = assemble(_campaign(sources, modules))
    contribution = propagate(assembled.problem, 0.95).contribution[0]
    u = np.hypot.reduce(contribution[:, : len(sources)], axis=1)
    return float(u[CL]), float(u[CD] / COUNTS)


def _zero(across_taps: str) -> list[Source]:
    return [source("zero", "tap pressure", size(3.5, Shape.RECTANGULAR), across_taps=across_taps)]


HALVES = ["B" if i < 24 else "A" for i in range(49)]
INTERLEAVED = ["A" if i % 2 else "B" for i in range(49)]


def test_a_zero_common_to_all_taps_acts_on_no_force() -> None:
    cl, cd = _u(_zero("common"), HALVES)
    assert cl < 1e-15
    assert cd < 1e-11


def test_independent_ports() -> None:
    cl, cd = _u(_zero("independent"), HALVES)
    assert cl == pytest.approx(0.00043, rel=0.2)
    assert cd == pytest.approx(0.8, rel=0.2)


def test_upper_on_one_module_and_lower_on_another() -> None:
    cl, cd = _u(_zero("by module"), HALVES)
    assert cl == pytest.approx(0.00186, rel=0.2)
    assert cd == pytest.approx(2.7, rel=0.2)


def test_interleaved_modules_cancel() -> None:
    cl, cd = _u(_zero("by module"), INTERLEAVED)
    assert cl < 1e-5
    assert cd < 0.2


def test_tap_location_and_row() -> None:
    """0.1 mm on a 300 mm chord, as a standard uncertainty."""
    step = size(0.1 / 300.0)
    each = [source("place", "tap location", step, across_taps="independent")]
    cl, cd = _u(each, HALVES)
    assert cl == pytest.approx(0.00046, rel=0.2)
    assert cd == pytest.approx(8.6, rel=0.2)
    together = [source("place", "tap location", step, across_taps="common")]
    cl, cd = _u(together, HALVES)
    assert cl == pytest.approx(0.0012, rel=0.2)
    assert cd == pytest.approx(14.0, rel=0.2)
    row = [source("row", "tap row", step, across_taps="common")]
    cl, cd = _u(row, HALVES)
    assert cl == pytest.approx(0.0014, rel=0.2)
    assert cd == pytest.approx(3.0, rel=0.2)


def test_angle_turns_lift_into_drag() -> None:
    """0.01° turns 1.7 counts of cl = 1 into drag: sin(0.01°) = 1.745e-4."""
    turned = [source("angle", "angle", size(np.radians(0.01)))]
    assembled = assemble(_campaign(turned, HALVES))
    contribution = propagate(assembled.problem, 0.95).contribution[0]
    cl = assembled.problem.estimate[0, CL]
    assert contribution[CD, 0] / COUNTS == pytest.approx(1.745 * cl, rel=1e-3)
