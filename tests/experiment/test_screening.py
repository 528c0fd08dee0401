"""Readings that look wrong are flagged, and those that do not are left in peace."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from campaigns import campaign, size, source
from tapband.experiment.screening import ABOVE, FULL, JUMP, LEFT_OUT, VACUUM
from tapband.nouns.campaign import Campaign
from tapband.nouns.source import COMMON, INDEPENDENT
from tapband.reduction import Reduced, reduce_campaign

PORT = [source("port", "tap pressure", size(4.0), INDEPENDENT, INDEPENDENT)]


def _reduced(c: Campaign) -> Reduced:
    return reduce_campaign(c, trials="200")


def _changed(c: Campaign, point: int, tap: int, value: float) -> Campaign:
    assert c.points is not None
    readings = c.points.readings.copy()
    readings[point, tap] = value
    return replace(c, points=replace(c.points, readings=readings))


def test_exact_flow_with_its_suction_peak_is_not_flagged() -> None:
    r = _reduced(campaign(PORT, alphas=(-4.0, 0.0, 4.0, 8.0, 12.0)))
    assert np.all(r.taps.flag == "")


def test_each_suspicion_has_its_flag_and_its_warning() -> None:
    c = campaign(PORT, alphas=(2.0,), lost={(0, 3): True})
    assert c.points is not None
    total = c.points.channels["p_total"][0]
    static = c.points.channels["p_static"][0]
    for value, flag in ((total + 400.0, ABOVE), (-500.0, VACUUM), (129_999.0, FULL), (static - 9000.0, JUMP)):
        r = _reduced(_changed(c, 0, 30, value))
        assert flag in r.taps.flag[0, 30]
        assert any(f"flagged {flag}, used all the same: T31 at R1/P1" in text for text in r.warnings)
        assert r.taps.flag[0, 3] == LEFT_OUT


def test_a_negative_absolute_pressure_is_past_vacuum_however_ill_q_is_known() -> None:
    wild = [source("static", "static pressure", size(2000.0), COMMON)]
    r = _reduced(_changed(campaign(wild, alphas=(2.0,)), 0, 12, -1.0))
    assert VACUUM in r.taps.flag[0, 12]
